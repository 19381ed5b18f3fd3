"""The rules of the merit: read from TOML, strictly, on top of the defaults in `merit.toml`."""

from __future__ import annotations

import difflib
import re
from collections.abc import Mapping
from dataclasses import dataclass
from importlib import resources
from pathlib import Path
from typing import Any

from topovet.errors import InputError, quoted
from topovet.intake.opening import read_lines
from topovet.intake.toml_text import parse_toml

MAX_BYTES = 100_000
LARGEST_WEIGHT = 1000.0
LARGEST_SCALE = 1e6

_POSITIVE = frozenset({"full_kT", "full_meV"})
"""Scales: greater than 0. All keys outside [weights] that are not scales lie between 0 and 1."""


@dataclass(frozen=True, slots=True)
class MeritRules:
    """Numbers of the merit by table and key, complete, and where they come from.

    Attributes
    ----------
    tables
        Tables and keys of `merit.toml`, each with a checked number.
    source
        "defaults", or the name of the file that changes some of them.
    """

    tables: Mapping[str, Mapping[str, float]]
    source: str

    @property
    def weights(self) -> Mapping[str, float]:
        """Part of the merit -> points."""
        return self.tables["weights"]


def default_text() -> str:
    """The shipped rules, as TOML with comments."""
    return resources.files("topovet.screening").joinpath("merit.toml").read_text("utf-8")


def default_rules() -> MeritRules:
    """The shipped rules."""
    return MeritRules(
        parse_toml("defaults", default_text().splitlines(), expected="", todo=""), "defaults"
    )


def read_rules(path: str | Path) -> MeritRules:
    """The rules of a file; keys it leaves out keep their defaults.

    Parameters
    ----------
    path
        TOML with tables and keys of `merit.toml`.

    Raises
    ------
    InputError
        Not TOML; an unknown table or key (the message names the nearest known one); a value that
        is no number or out of range; no weight above 0.
    """
    lines = read_lines(path, max_bytes=MAX_BYTES)
    given = parse_toml(
        path,
        lines,
        expected="lines such as gap = 30 below a heading such as [weights]",
        todo="correct the line; topovet shortlist --show-merit prints an example",
    )
    tables = {name: dict(table) for name, table in default_rules().tables.items()}
    for name, table in given.items():
        if name not in tables or not isinstance(table, dict):
            raise _unknown(path, lines, name, list(tables), "table", is_table=True)
        for key, value in table.items():
            if key not in tables[name]:
                raise _unknown(path, lines, key, list(tables[name]), f"key of [{name}]", name)
            tables[name][key] = _checked(path, lines, name, key, value)
    if not any(tables["weights"].values()):
        raise InputError(
            path,
            found="weights that are all 0",
            expected="at least one above 0",
            todo="give one part of the merit a weight",
        )
    return MeritRules(tables, Path(path).name)


def _unknown(
    path: str | Path,
    lines: list[str],
    name: str,
    known: list[str],
    kind: str,
    table: str = "",
    *,
    is_table: bool = False,
) -> InputError:
    near = difflib.get_close_matches(name, known, n=1)
    hint = f"write {near[0]} if that is meant, or " if near else ""
    return InputError(
        path,
        line=_line_of(lines, "" if is_table else table, name),
        found=f"{quoted(name)}, which is no {kind}",
        expected=f"one of {', '.join(known)}",
        todo=f"{hint}delete it",
    )


def _checked(path: str | Path, lines: list[str], table: str, key: str, value: Any) -> float:
    if table == "weights":
        low, high, expected = 0.0, LARGEST_WEIGHT, f"points from 0 to {LARGEST_WEIGHT:g}"
    elif key in _POSITIVE:
        low, high = 1e-6, LARGEST_SCALE
        expected = f"a number above 0, at most {LARGEST_SCALE:g}"
    else:
        low, high, expected = 0.0, 1.0, "a number from 0 to 1"
    is_number = isinstance(value, int | float) and not isinstance(value, bool)
    if not is_number or not low <= value <= high:  # not a number is in no range
        raise InputError(
            path,
            line=_line_of(lines, table, key),
            found=f"{key} = {quoted(_shown(value))}",
            expected=expected,
            todo=f"correct it in [{table}], or delete the line to keep the default",
        )
    return float(value)


def _shown(value: Any) -> str:
    try:
        return str(value)
    except ValueError:  # an integer of thousands of digits
        return "a number of thousands of digits"


def _line_of(lines: list[str], table: str, key: str) -> int | None:
    """1-based line on which a table begins or a key of a table is set, as a search can tell."""
    inside = table == ""
    name = re.escape(key)
    pattern = re.compile(rf"\[*\s*[\"']?{name}[\"']?\s*(=|\.|\])")
    dotted = re.compile(rf"{re.escape(table)}\s*[.=].*\b{name}\b") if table else pattern
    for number, line in enumerate((raw.strip() for raw in lines), start=1):
        if table and line.startswith("["):
            inside = line.strip("[] ").split("]")[0].strip(" \"'") == table
        if (inside and pattern.match(line)) or dotted.match(line):
            return number
    return None
