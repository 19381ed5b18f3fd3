"""The records of a `_wsvec.dat`: their shape checked, not yet what they mean."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import NoReturn

import numpy as np

from topovet.arrays import IntArray
from topovet.errors import InputError, quoted
from topovet.intake.shifts.integer_lines import NO_LINES, IntegerLines

MOST_SHIFTS = 125
"""More equally near images than any lattice has: a larger count is damage."""

AGAIN = (
    "copy the file of the same Wannier90 run again, or remove it to have the shifts rebuilt from "
    "the centres"
)
"""What to do about any damage."""

_HEAD, _COUNT, _SHIFT = 5, 1, 3
"""Integers on the line of labels, on that of the count, and on that of a shift."""

_EXPECTED = {
    _HEAD: "R1 R2 R3 m n",
    _COUNT: f"a count from 1 to {MOST_SHIFTS}",
    _SHIFT: "three integers",
}


@dataclass(frozen=True, slots=True, eq=False)
class WsRecords:
    """Whole records: labels (n, 5), counts (n,), shifts (sum, 3), line of each label (n,)."""

    labels: IntArray
    counts: IntArray
    shifts: IntArray
    line_no: IntArray


def ws_records(parts: Iterator[IntegerLines], file: str) -> Iterator[WsRecords]:
    """Cut the lines into records; what stands open at the end of a part waits for the next.

    Parameters
    ----------
    parts
        The lines below the comment line.
    file
        Name for messages.

    Raises
    ------
    InputError
        A line with the wrong number of integers, a count that does not fit, an unfinished end.
    """
    waiting = NO_LINES
    for part in parts:
        lines = waiting.followed_by(part)
        heads = np.flatnonzero(lines.words == _HEAD)
        cut = int(heads[-1]) if len(heads) else 0
        if cut:
            yield _cut_records(lines, cut, file)
        waiting = lines.from_line(cut)
        if len(waiting.words) > MOST_SHIFTS + 2:  # no record is that long: it is not held back
            _cut_records(waiting, len(waiting.words), file)
    if len(waiting.words):
        yield _cut_records(waiting, len(waiting.words), file)


def _cut_records(lines: IntegerLines, stop: int, file: str) -> WsRecords:
    """Records that fill the lines before `stop` exactly; anything else is an error."""
    words = lines.words[:stop]
    heads = np.flatnonzero(words == _HEAD)
    second = heads[heads + 1 < stop] + 1
    role = np.full(stop, _SHIFT)
    role[second] = _COUNT
    role[heads] = _HEAD
    role[0] = _HEAD
    counts = np.zeros(len(heads), dtype=np.int64)
    counts[: len(second)] = lines.values[(np.cumsum(words) - words)[second]]
    lengths = np.diff(heads, append=stop)
    miscounted = (counts != lengths - 2) | (counts < 1) | (counts > MOST_SHIFTS)
    if miscounted.any() or not np.array_equal(words, role):
        _blame(lines, role, heads, counts, file)
    values = lines.values[: int(words.sum())]
    return WsRecords(
        values[np.repeat(role == _HEAD, words)].reshape(-1, _HEAD),
        counts,
        values[np.repeat(role == _SHIFT, words)].reshape(-1, _SHIFT),
        lines.line_no[heads],
    )


def _blame(
    lines: IntegerLines, role: IntArray, heads: IntArray, counts: IntArray, file: str
) -> NoReturn:
    """Name the first line that does not fit, and what should stand there."""
    stop = len(role)
    misshapen = lines.words[:stop] != role
    first = int(np.argmax(misshapen)) if misshapen.any() else stop
    expected = _EXPECTED[int(role[first])] if first < stop else ""
    for head, length, count in zip(heads, np.diff(heads, append=stop), counts, strict=True):
        row, wanted = _fault_in_record(int(length), int(count))
        if wanted and head + row <= first:
            first, expected = int(head) + row, wanted
        if wanted or head >= first:
            break
    if first < len(lines.words):
        start = int(lines.words[:first].sum())
        words = lines.values[start : start + int(lines.words[first])]
        line, found = int(lines.line_no[first]), quoted(" ".join(str(word) for word in words))
    else:
        line, found = int(lines.line_no[-1]), "the end of the file"
    raise InputError(file, line=line, found=found, expected=expected, todo=AGAIN)


def _fault_in_record(length: int, count: int) -> tuple[int, str]:
    """Row of a record at which it departs from its count, and what was due; "" where it fits."""
    if length == 1 or not 1 <= count <= MOST_SHIFTS:
        return 1, _EXPECTED[_COUNT]
    if count < length - 2:
        return 2 + count, _EXPECTED[_HEAD]
    if count > length - 2:
        return length, f"shift {length - 1} of {count}"
    return 0, ""
