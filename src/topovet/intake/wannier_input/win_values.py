"""Numbers, logicals and ranges as Fortran reads them, with the line named when they are wrong."""

from __future__ import annotations

import math
import re
from collections import Counter
from collections.abc import Sequence

from topovet.errors import InputError, quoted
from topovet.intake.wannier_input.win_grammar import Line

MAX_RANGE_ENTRIES = 100_000
"""Most numbers a range such as 1-40 may stand for; a misprint must not fill the memory."""

_REAL = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eEdDqQ][+-]?\d+)?", re.ASCII)
_INTEGER = re.compile(r"[+-]?\d{1,9}", re.ASCII)
_LOGICAL = re.compile(r"\.?(?:(t|true)|(f|false))\.?", re.ASCII | re.IGNORECASE)
_RANGE = re.compile(r"(\d{1,9})(?:\s*[-:]\s*(\d{1,9}))?", re.ASCII)
_COUNT_WORDS = {1: "one", 2: "two", 3: "three", 4: "four"}


def to_float(text: str) -> float | None:
    """A finite Fortran real such as 1.0d0; None where the text is not one."""
    if not _REAL.fullmatch(text):
        return None
    value = float(re.sub("[dDqQ]", "e", text))
    return value if math.isfinite(value) else None


def to_int(text: str) -> int | None:
    """An integer of at most nine digits; None where the text is not one."""
    return int(text) if _INTEGER.fullmatch(text) else None


def split_items(text: str) -> list[str]:
    """Items of a Fortran list: separated by blanks, by a comma, or by both."""
    return re.split(r"\s*,\s*|\s+", text.strip())


def read_floats(
    file: str, line: Line, items: Sequence[str], what: str, *, count: int = 3
) -> list[float]:
    """Exactly `count` finite reals.

    Parameters
    ----------
    file, line
        Where the items stand.
    items
        The texts of the numbers.
    what
        What they are, for the message: "a lattice vector".

    Raises
    ------
    InputError
        Another number of items, or one that is not a finite number.
    """
    values = [to_float(item) for item in items]
    finite = [value for value in values if value is not None]
    if len(items) != count or len(finite) != count:
        number = "one finite number" if count == 1 else f"{_COUNT_WORDS[count]} finite numbers"
        raise InputError(
            file,
            line=line.number,
            found=quoted(line.text),
            expected=f"{number} for {what}",
            todo="correct the line",
        )
    return finite


def read_int(file: str, line: Line, what: str, *, least: int, most: int = 10**9) -> int:
    """One integer between `least` and `most`.

    Raises
    ------
    InputError
        The text is not such an integer.
    """
    return read_ints(file, line, what, counts=(1,), least=least, most=most)[0]


def read_ints(
    file: str, line: Line, what: str, *, counts: tuple[int, ...], least: int, most: int = 10**9
) -> list[int]:
    """Integers between `least` and `most`; their number must be among `counts`.

    Raises
    ------
    InputError
        Another number of items, or one that is not such an integer.
    """
    items = split_items(line.text)
    values = [to_int(item) for item in items]
    good = [value for value in values if value is not None and least <= value <= most]
    if len(good) != len(items) or len(items) not in counts:
        number = " or ".join(_COUNT_WORDS[count] for count in counts)
        noun = "integer" if counts == (1,) else "integers"
        bounds = f"from {least} to {most}" if most < 10**9 else f"of at least {least}"
        raise InputError(
            file,
            line=line.number,
            found=f"{what} = {quoted(line.text)}",
            expected=f"{number} {noun} {bounds}",
            todo="correct the line",
        )
    return good


def read_logical(file: str, line: Line, what: str) -> bool:
    """A Fortran logical: true, T, .true., .T. and their opposites.

    Raises
    ------
    InputError
        The text is neither.
    """
    match = _LOGICAL.fullmatch(line.text)
    if match is None:
        raise InputError(
            file,
            line=line.number,
            found=f"{what} = {quoted(line.text)}",
            expected=".true. or .false.",
            todo="correct the line",
        )
    return match[1] is not None


def read_ranges(file: str, line: Line, what: str) -> list[int]:
    """Positive integers from a list of ranges such as `1-4, 7,9:10`, in the order written.

    Raises
    ------
    InputError
        An entry is not a positive integer or a range of them, a number stands twice, or the
        ranges hold more than `MAX_RANGE_ENTRIES` numbers.
    """
    joined = re.sub(r"\s*([-:])\s*", r"\1", line.text)
    numbers: list[int] = []
    for item in re.split(r"\s*[,;]\s*|\s+", joined):
        match = _RANGE.fullmatch(item)
        ends = sorted(int(end) for end in match.groups() if end) if match else [0]
        first, last = ends[0], ends[-1]
        if first < 1 or len(numbers) + last - first >= MAX_RANGE_ENTRIES:
            raise InputError(
                file,
                line=line.number,
                found=f"{quoted(item)} in {what}",
                expected="positive integers and ranges such as 1-4, 7, 9-10",
                todo="correct the line",
            )
        numbers.extend(range(first, last + 1))
    repeated = [number for number, times in Counter(numbers).items() if times > 1]
    if repeated:
        raise InputError(
            file,
            line=line.number,
            found=f"{repeated[0]} more than once in {what}",
            expected="each number once",
            todo="correct the line",
        )
    return numbers
