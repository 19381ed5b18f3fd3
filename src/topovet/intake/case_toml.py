"""`case.toml`: what the files of a case cannot say."""

from __future__ import annotations

import difflib
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

from topovet.errors import InputError, quoted
from topovet.intake.opening import read_lines
from topovet.intake.records import CaseSettings
from topovet.intake.toml_text import parse_toml

MAX_BYTES = 100_000
"""No case needs more settings; a larger file is something else."""

LONGEST_NAME = 200
LARGEST_MILLER_INDEX = 20
LONGEST_PATH = 1000

KEYS = ("name", "filling", "fermi_eV", "dimension", "inversion_centre", "surface", "spinless")


def read_settings(path: str | Path) -> CaseSettings:
    """The settings of a case, each checked for type and range.

    Parameters
    ----------
    path
        A `case.toml`.

    Returns
    -------
    CaseSettings
        None where the file is silent.

    Raises
    ------
    InputError
        Not TOML, an unknown key (the message names the nearest known one), or a value of the
        wrong kind.
    """
    lines = read_lines(path, max_bytes=MAX_BYTES)
    table = parse_toml(
        path,
        lines,
        expected="each key once, in lines such as filling = 18",
        todo="correct the line",
    )
    for key in table:
        if key not in KEYS:
            raise _unknown_key(path, key, lines)
    values: dict[str, Any] = {}
    for key, (is_valid, expected) in RULES.items():
        if key not in table:
            continue
        if not is_valid(table[key]):
            raise InputError(
                path,
                line=line_of_key(key, lines),
                found=f"{key} = {quoted(_shown(table[key]))}",
                expected=expected,
                todo="correct it or delete the line",
            )
        values[key] = table[key]
    return _settings(values)


def _unknown_key(path: str | Path, key: str, lines: list[str]) -> InputError:
    lower = {known.lower(): known for known in KEYS}
    near = difflib.get_close_matches(key.lower(), list(lower), n=1)
    hint = f"write {lower[near[0]]} if that is meant, or " if near else ""
    return InputError(
        path,
        line=line_of_key(key, lines),
        found=f"the key {quoted(key)}",
        expected=f"one of {', '.join(KEYS)}",
        todo=f"{hint}delete it",
    )


def line_of_key(key: str, lines: list[str]) -> int | None:
    """1-based line on which a key is set, as far as a search of the text can tell."""
    pattern = re.compile(rf"\[*\s*[\"']?{re.escape(key)}[\"']?\s*(=|\.|\])")
    return next((i for i, line in enumerate(lines, start=1) if pattern.match(line.lstrip())), None)


def _shown(value: Any) -> str:
    try:
        return str(value)
    except ValueError:  # an integer of thousands of digits
        return "a number of thousands of digits"


def _settings(values: dict[str, Any]) -> CaseSettings:
    centre, surface, fermi = (
        values.get(key) for key in ("inversion_centre", "surface", "fermi_eV")
    )
    return CaseSettings(
        name=values.get("name"),
        filling=values.get("filling"),
        fermi_ev=None if fermi is None else float(fermi),
        dimension=values.get("dimension"),
        inversion_centre=None
        if centre is None
        else (float(centre[0]), float(centre[1]), float(centre[2])),
        surface=None if surface is None else (surface[0], surface[1], surface[2]),
        spinless=values.get("spinless"),
    )


def _is_integer(value: Any) -> bool:
    return isinstance(value, int) and not isinstance(value, bool)


def _is_number(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool) and abs(value) < 1e6


def _is_triple(value: Any, of: Callable[[Any], bool]) -> bool:
    return isinstance(value, list) and len(value) == 3 and all(of(entry) for entry in value)


def _is_name(value: Any) -> bool:
    return isinstance(value, str) and value.isprintable() and 0 < len(value.strip()) <= LONGEST_NAME


def _is_path(value: Any) -> bool:
    return isinstance(value, str) and value.isprintable() and 0 < len(value.strip()) <= LONGEST_PATH


def _is_filling(value: Any) -> bool:
    return _is_integer(value) and 0 < value < 1_000_000


def _is_dimension(value: Any) -> bool:
    return _is_integer(value) and value in (2, 3)


def _is_centre(value: Any) -> bool:
    return _is_triple(value, _is_number)


def _is_miller(value: Any) -> bool:
    return (
        _is_triple(value, _is_integer)
        and any(value)
        and all(abs(index) <= LARGEST_MILLER_INDEX for index in value)
    )


RULES: dict[str, tuple[Callable[[Any], bool], str]] = {
    "name": (_is_name, f"a text of 1 to {LONGEST_NAME} printable characters in quotes"),
    "filling": (_is_filling, "a whole number of occupied Wannier bands, at least 1"),
    "fermi_eV": (_is_number, "a Fermi energy in eV"),
    "dimension": (_is_dimension, "2 or 3"),
    "inversion_centre": (_is_centre, "three fractional coordinates such as [0, 0, 0.5]"),
    "surface": (
        _is_miller,
        f"three whole Miller indices up to {LARGEST_MILLER_INDEX}, not all 0, such as [0, 0, 1]",
    ),
    "spinless": (
        _is_path,
        "the path of the same compound without spin-orbit coupling, in quotes and printable "
        "characters",
    ),
}
"""Key -> (check, what is expected)."""
