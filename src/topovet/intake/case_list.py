"""A list of cases as comma-separated values: where each lies, and what its files cannot say."""

from __future__ import annotations

import csv
import difflib
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from topovet.errors import InputError, quoted
from topovet.intake.case_toml import RULES
from topovet.intake.opening import read_lines

MAX_BYTES = 1 << 24

COLUMNS = (
    *("path", "name", "filling", "fermi_eV"),
    *("dimension", "inversion_centre", "surface", "spinless"),
)

_TOO_LIKE = 0.7
"""An unknown column whose name is this close to a known one is taken for a slip of the pen."""


@dataclass(frozen=True, slots=True)
class ListedCase:
    """One row; None where it is silent.

    Attributes
    ----------
    line
        1-based line on which the row begins.
    path
        Case folder or Hamiltonian file, relative ones taken from the folder of the list.
    written
        The path as it is written in the list.
    name, filling, fermi_ev, dimension, inversion_centre, surface
        As in `case.toml`, over which they prevail.
    spinless
        Likewise; a relative path is taken from the folder of the list.
    """

    line: int
    path: Path
    written: str
    name: str | None = None
    filling: int | None = None
    fermi_ev: float | None = None
    dimension: int | None = None
    inversion_centre: tuple[float, float, float] | None = None
    surface: tuple[int, int, int] | None = None
    spinless: Path | None = None


@dataclass(frozen=True, slots=True)
class CaseList:
    """The rows of a list in order, and the names of columns that mean nothing here."""

    cases: tuple[ListedCase, ...]
    unused: tuple[str, ...]


def read_case_list(path: Path) -> CaseList:
    """Read a list of cases.

    The first line names the columns: `path`, and any of `name`, `filling`, `fermi_eV`,
    `dimension`, `inversion_centre` and `surface` (three numbers with blanks between them) and
    `spinless` (another path). An empty cell says nothing. Other columns are named in the result
    and not used.

    Raises
    ------
    InputError
        No list in this form, a value of the wrong kind, both filling and fermi_eV, or two rows
        that cannot be told apart; the message names the line.
    """
    rows = _rows(path, read_lines(path, max_bytes=MAX_BYTES))
    line, header = next(rows, (1, []))
    columns = _checked_header(path, line, header)
    cases = tuple(_case(path, line, columns, cells) for line, cells in rows)
    if not cases:
        raise InputError(
            path,
            found="no row below the names of the columns",
            expected="one row for each case",
            todo="add the cases",
        )
    _check_distinct(path, cases)
    return CaseList(cases, tuple(name for name in columns if name not in COLUMNS))


def _rows(path: Path, lines: list[str]) -> Iterator[tuple[int, list[str]]]:
    """Rows that are not blank, with the line on which each begins."""
    reader = csv.reader((line + "\n" for line in lines), strict=True)
    begin = 1
    try:
        for cells in reader:
            if any(cell.strip() for cell in cells):
                yield begin, [cell.strip() for cell in cells]
            begin = reader.line_num + 1
    except csv.Error as error:
        raise InputError(
            path,
            line=begin,
            found=f"what is no row of comma-separated values ({error})",
            expected='cells with commas between them, quoted like "this" where they hold a comma',
            todo="correct the line",
        ) from None


def _checked_header(path: Path, line: int, header: list[str]) -> list[str]:
    if "path" not in header:
        mark = next((m for m in (";", "\t") if any(m in cell for cell in header)), None)
        shown = quoted(",".join(header)) if header else "nothing"
        raise InputError(
            path,
            line=line,
            found=shown,
            expected="the names of the columns, path among them",
            todo=f"save the list with commas instead of {quoted(mark)} between the cells"
            if mark
            else f"begin with a line such as {','.join(COLUMNS[:4])}",
        )
    for i, name in enumerate(header):
        if name in header[:i]:
            raise _header_error(path, line, f"the column {quoted(name)} twice", "each column once")
        near = difflib.get_close_matches(name.lower(), _LOWER, n=1, cutoff=_TOO_LIKE)
        if name not in COLUMNS and near:
            meant = _LOWER[near[0]]
            raise _header_error(
                path, line, f"the column {quoted(name)}", f"{meant}, or a name unlike it"
            )
    return header


_LOWER = {name.lower(): name for name in COLUMNS}


def _header_error(path: Path, line: int, found: str, expected: str) -> InputError:
    return InputError(path, line=line, found=found, expected=expected, todo="rename the column")


def _case(path: Path, line: int, columns: list[str], cells: list[str]) -> ListedCase:
    if len(cells) != len(columns):
        raise InputError(
            path,
            line=line,
            found=f"{len(cells)} cell{'s' * (len(cells) != 1)}",
            expected=f"{len(columns)}, as many as there are columns",
            todo="correct the row; a cell with a comma in it needs quotation marks",
        )
    row = dict(zip(columns, cells, strict=True))
    values = {key: _value(path, line, key, row[key]) for key in COLUMNS[1:] if row.get(key)}
    if "filling" in values and "fermi_eV" in values:
        raise InputError(
            path,
            line=line,
            found="both a filling and a fermi_eV",
            expected="one of them",
            todo="leave the other cell empty",
        )
    written = row["path"]
    if not written or "\0" in written:
        raise InputError(
            path,
            line=line,
            found="an empty path" if not written else quoted(written),
            expected="the path of a case",
            todo="give one or delete the row",
        )
    return ListedCase(
        line=line,
        path=path.parent / written,
        written=written,
        name=values.get("name"),
        filling=values.get("filling"),
        fermi_ev=values.get("fermi_eV"),
        dimension=values.get("dimension"),
        inversion_centre=values.get("inversion_centre"),
        surface=values.get("surface"),
        spinless=path.parent / values["spinless"] if "spinless" in values else None,
    )


def _value(path: Path, line: int, key: str, text: str) -> Any:
    """A cell as a value of the kind that `case.toml` takes for this key."""
    is_valid, expected = RULES[key]
    try:
        value = _CONVERSIONS[key](text)
    except ValueError:
        value = None
    if value is None or not is_valid(value):
        if isinstance(value, list) or key in ("inversion_centre", "surface"):
            expected = expected.replace("[", '"').replace("]", '"').replace(", 0", " 0")
        raise InputError(
            path,
            line=line,
            found=f"{key} {quoted(text)}",
            expected=expected,
            todo="correct the cell or leave it empty",
        )
    return tuple(value) if isinstance(value, list) else value


def _numbers(of: Callable[[str], Any]) -> Callable[[str], list[Any]]:
    return lambda text: [of(word) for word in text.strip("[]() ").replace(",", " ").split()]


def _plain_number(text: str) -> float:
    """A number written with digits; float() would also take "nan", "infinity" and "1_000"."""
    if set(text) - set("0123456789+-.eE"):
        raise ValueError(text)
    return float(text)


def _plain_integer(text: str) -> int:
    digits = text.removeprefix("-")
    if not (digits.isascii() and digits.isdecimal()) or len(text) > 9:
        raise ValueError(text)
    return int(text)


_CONVERSIONS: dict[str, Callable[[str], Any]] = {
    "name": str,
    "filling": _plain_integer,
    "fermi_eV": _plain_number,
    "dimension": _plain_integer,
    "inversion_centre": _numbers(_plain_number),
    "surface": _numbers(_plain_integer),
    "spinless": str,
}


def _check_distinct(path: Path, cases: tuple[ListedCase, ...]) -> None:
    """Two rows may share a path (two fillings of one Hamiltonian), never a name."""
    seen: dict[str, int] = {}
    for case in cases:
        name = case.name or case.written
        if name in seen:
            raise InputError(
                path,
                line=case.line,
                found=f"{quoted(name)} again, as on line {seen[name]}",
                expected="rows with names of their own",
                todo="give each row another name, or delete one of them",
            )
        seen[name] = case.line
