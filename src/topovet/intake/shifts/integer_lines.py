"""Lines of small integers, a few megabytes at a time, without a Python loop over lines."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO

import numpy as np
from numpy.typing import NDArray

from topovet.arrays import IntArray
from topovet.errors import InputError, quoted

ByteArray = NDArray[np.uint8]

CHUNK_BYTES = 2**22
"""Bytes scanned at a time; the scan needs about 20 times as much."""

LONGEST_NUMBER = 6
"""Digits of the longest integer."""

_NEWLINE, _MINUS, _ZERO = ord("\n"), ord("-"), ord("0")
_SPACES = np.zeros(256, dtype=bool)
_SPACES[[ord(" "), ord("\t"), ord("\r")]] = True


@dataclass(frozen=True, slots=True, eq=False)
class IntegerLines:
    """Consecutive lines that hold integers; blank lines are left out.

    Attributes
    ----------
    values
        (n_words,) all integers in order.
    words
        (n_lines,) integers on each line, at least 1.
    line_no
        (n_lines,) 1-based line numbers.
    """

    values: IntArray
    words: IntArray
    line_no: IntArray

    def from_line(self, first: int) -> IntegerLines:
        """The lines from the given row on."""
        skipped = int(self.words[:first].sum())
        return IntegerLines(self.values[skipped:], self.words[first:], self.line_no[first:])

    def up_to_line(self, stop: int) -> IntegerLines:
        """The lines before the given row."""
        kept = int(self.words[:stop].sum())
        return IntegerLines(self.values[:kept], self.words[:stop], self.line_no[:stop])

    def followed_by(self, other: IntegerLines) -> IntegerLines:
        """These lines, then those."""
        return IntegerLines(
            np.concatenate([self.values, other.values]),
            np.concatenate([self.words, other.words]),
            np.concatenate([self.line_no, other.line_no]),
        )


NO_LINES = IntegerLines(
    np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int64)
)


def integer_lines(
    stream: BinaryIO, file: str | Path, *, line_no: int, expected: str, todo: str
) -> Iterator[IntegerLines]:
    """All further lines of a stream, some megabytes at a time.

    Parameters
    ----------
    stream
        Stands at the beginning of a line.
    file
        Its name, for messages.
    line_no
        Number of the line read last.
    expected, todo
        For the message about anything that is not an integer.

    Raises
    ------
    InputError
        A line with anything but integers of up to six digits, blanks between them.
    """
    rest = b""
    while True:
        data = stream.read(CHUNK_BYTES)
        whole = rest + data if data else rest + b"\n" * bool(rest)
        stop = whole.rfind(b"\n") + 1
        rest = whole[stop:]
        if stop == 0 and len(rest) > CHUNK_BYTES:
            _refuse(file, line_no + 1, rest, expected, todo)
        if stop:
            buffer = np.frombuffer(whole, dtype=np.uint8, count=stop)
            fault = _first_fault(buffer)
            if fault is not None:
                begin = whole.rfind(b"\n", 0, fault) + 1
                offending = line_no + 1 + whole.count(b"\n", 0, begin)
                end = whole.find(b"\n", begin)
                _refuse(file, offending, whole[begin:end], expected, todo)
            lines = _scan(buffer, line_no)
            line_no += int(np.count_nonzero(buffer == _NEWLINE))
            yield lines
        if not data:
            return


def _refuse(file: str | Path, line: int, text: bytes, expected: str, todo: str) -> None:
    raise InputError(
        file, line=line, found=quoted(text[:200].strip()), expected=expected, todo=todo
    )


def _first_fault(buffer: ByteArray) -> int | None:
    """Position of the first byte that is part of no integer, or of a too long one.

    The buffer ends with a newline.
    """
    digit = (buffer - _ZERO) < 10  # unsigned: everything below "0" wraps to large values
    minus = buffer == _MINUS
    inside = digit | minus
    fault = ~(inside | _SPACES[buffer] | (buffer == _NEWLINE))
    fault[1:] |= minus[1:] & inside[:-1]
    fault[:-1] |= minus[:-1] & ~digit[1:]
    n_starts = max(len(buffer) - LONGEST_NUMBER, 0)
    too_long = digit[:n_starts]
    for place in range(1, LONGEST_NUMBER + 1):
        too_long = too_long & digit[place : place + n_starts]
    fault[:n_starts] |= too_long
    return int(np.argmax(fault)) if fault.any() else None


def _scan(buffer: ByteArray, line_no: int) -> IntegerLines:
    """Integers of a faultless buffer that ends with a newline."""
    inside = ((buffer - _ZERO) < 10) | (buffer == _MINUS)
    starts = np.flatnonzero(inside & ~np.concatenate([[False], inside[:-1]]))
    last = np.flatnonzero(inside[:-1] & ~inside[1:])
    negative = buffer[starts] == _MINUS
    n_digits = last - starts + 1 - negative
    values = (buffer[last] - _ZERO).astype(np.int64)
    for place in range(1, int(n_digits.max(initial=0))):
        longer = np.flatnonzero(n_digits > place)
        values[longer] += (buffer[last[longer] - place] - _ZERO).astype(np.int64) * 10**place
    values[negative] *= -1
    newlines = np.flatnonzero(buffer == _NEWLINE)
    words = np.diff(np.searchsorted(starts, newlines), prepend=0).astype(np.int64)
    filled = np.flatnonzero(words)
    return IntegerLines(values, words[filled], filled + line_no + 1)
