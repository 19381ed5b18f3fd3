"""Numbers in fixed columns, many lines at once, every byte looked at.

Lines that all share one layout (Wannier90's `5I5,2F12.6`, or another code's widths) are kept as
one block of bytes, and their characters taken as words (`digit_words.py`). A number is an integer
mantissa divided by a power of ten; with both below 2**53 and 1e22 that division is correctly
rounded, hence bit for bit what `float(text)` gives. Numbers beyond that range are converted one by
one with `float`.

Anything unexpected raises `NotInColumnsError`; it is for the caller to look closer.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import BinaryIO

import numpy as np
from numpy.typing import NDArray

from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.intake.hamiltonian.digit_words import (
    MINUS_ZERO,
    SPACES,
    WORD,
    ZERO,
    WordArray,
    digits_value,
    fill_front,
    require,
    signed_value,
)

ByteArray = NDArray[np.uint8]

_MAX_EXACT_DECIMALS = 15
_MAX_EXACT_POWER = 22
_LONGEST_LINE = 512
_EXPONENT_WIDTH = 4
_HEAP_HINT_BYTES = 1 << 22
_NUMBER = re.compile(rb"-?(?:\d+\.(\d{1,40})|\d\.(\d{1,40})([EDed])[-+]\d\d)")
_POWERS = 10.0 ** np.arange(_MAX_EXACT_POWER + 1)


@dataclass(frozen=True, slots=True)
class NumberColumn:
    """A right-aligned number.

    Attributes
    ----------
    start, stop
        Byte range in the line, blanks before the number included.
    decimals
        Digits after the point, at least 1.
    exponent
        E, D, e or d, followed by a sign and two digits, and only one digit before the point;
        empty in plain decimal form.
    """

    start: int
    stop: int
    decimals: int
    exponent: bytes


@dataclass(frozen=True, slots=True)
class LineLayout:
    """Where the columns of a line are.

    Attributes
    ----------
    n_bytes
        Length of a line with its line end.
    tail
        What follows the last column: blanks, if any, and the line end.
    integer_stops
        End of each right-aligned integer column; the first starts at 0.
    numbers
        The number columns that follow.
    """

    n_bytes: int
    tail: bytes
    integer_stops: tuple[int, ...]
    numbers: tuple[NumberColumn, ...]

    @property
    def stops(self) -> tuple[int, ...]:
        """Ends of all columns."""
        return self.integer_stops + tuple(column.stop for column in self.numbers)

    @property
    def fixed_decimals(self) -> int | None:
        """Decimals of all numbers; None in exponent form or where columns differ."""
        found = {None if column.exponent else column.decimals for column in self.numbers}
        return found.pop() if len(found) == 1 else None


def infer_layout(
    line: bytes, n_integers: int, n_numbers: int, *, usual_stops: tuple[int, ...] = ()
) -> LineLayout | None:
    """The layout of fixed columns that one line (with its line end) suggests, or None.

    Columns end where the blank-separated words end; one of them must have more blanks before it
    than a separator and a sign would need. Where words touch and cannot be counted, `usual_stops`
    is tried if it has the line's length.
    """
    if len(line) > _LONGEST_LINE:
        return None
    body = line.rstrip(b" \r\n")
    stops = tuple(word.end() for word in re.finditer(rb"[^ ]+", body))
    if len(stops) != n_integers + n_numbers:
        if not usual_stops or len(body) != usual_stops[-1]:
            return None
        stops = usual_stops
    elif not re.search(rb"(^|[^ ])(  +-|   )", body):
        return None
    tail = line[stops[-1] :]
    numbers = [
        _number_column(body, start, stop)
        for start, stop in zip(stops[n_integers - 1 :], stops[n_integers:], strict=False)
    ]
    if None in numbers or tail.lstrip(b" ") not in (b"\n", b"\r\n"):
        return None
    columns = tuple(column for column in numbers if column is not None)
    return LineLayout(len(line), tail, stops[:n_integers], columns)


def _number_column(line: bytes, start: int, stop: int) -> NumberColumn | None:
    match = _NUMBER.fullmatch(line[start:stop].strip(b" "))
    if match is None:
        return None
    return NumberColumn(start, stop, len(match[1] or match[2]), match[3] or b"")


class FixedLines:
    """A reusable buffer of lines of one layout; methods look at the lines filled in last.

    Attributes
    ----------
    layout
        Of every line.
    n_lines
        How many were filled in last.
    """

    def __init__(self, layout: LineLayout, max_lines: int) -> None:
        self.layout = layout
        self.n_lines = 0
        self._n_read = 0
        # The C library maps arrays of this size anew, and clears them, for every temporary until
        # it has seen a mapped block freed. Showing it one triples the speed of a first reading.
        np.empty(_HEAP_HINT_BYTES, dtype=np.uint8)
        # One word of slack in front: the words of the first columns begin before the line does.
        self._buffer = np.zeros(WORD + max_lines * layout.n_bytes, dtype=np.uint8)

    def fill(
        self, stream: BinaryIO, n_lines: int, *, first: bytes = b"", final: bool = False
    ) -> bool:
        """Take the next lines from `first`, then from the stream; False where too few follow.

        If they are the final ones, a last line that lacks nothing but its line end is whole.
        """
        n_bytes = n_lines * self.layout.n_bytes
        target = self._buffer.data[WORD : WORD + n_bytes]
        target[: len(first)] = first
        n_read = len(first)
        while n_read < n_bytes:
            step: int = stream.readinto(target[n_read:])  # type: ignore[attr-defined]
            if not step:
                break
            n_read += step
        self.n_lines, self._n_read = n_lines, n_read
        line_end = self.layout.tail.lstrip(b" ")
        if final and n_bytes - n_read == len(line_end):
            target[n_read:] = line_end
            return True
        return n_read == n_bytes

    def set_columns(self, texts: list[NDArray[np.bytes_]]) -> None:
        """Fill the integer columns from arrays of text as wide as they are."""
        self.n_lines = len(texts[0])
        start = 0
        for stop, text in zip(self.layout.integer_stops, texts, strict=True):
            characters = text.view(np.uint8).reshape(self.n_lines, stop - start)
            for offset in range(start, stop):
                self.byte_column(offset)[:] = characters[:, offset - start]
            start = stop

    def content(self) -> bytes:
        """The bytes taken last, for a closer look at them."""
        return self._buffer[WORD : WORD + self._n_read].tobytes()

    def byte_column(self, offset: int) -> ByteArray:
        """(n_lines,) the byte at this offset of every line, writable."""
        column: ByteArray = np.ndarray(
            (self.n_lines,), np.uint8, self._buffer.data, WORD + offset, (self.layout.n_bytes,)
        )
        return column

    def words(self, start: int, stop: int, blank: bytes = b" ") -> WordArray:
        """(n_lines,) bytes [start, stop), at most 8, as words filled up in front with `blank`."""
        words: WordArray = np.ndarray(
            (self.n_lines,), "<u8", self._buffer.data, stop, (self.layout.n_bytes,)
        ).astype(np.uint64)
        if stop - start < WORD:
            fill_front(words, WORD - (stop - start), blank)
        return words

    def span_words(self, start: int, stop: int) -> list[WordArray]:
        """The bytes [start, stop) of every line as as many word columns as it takes."""
        return [self.words(max(start, end - WORD), end) for end in range(stop, start, -WORD)]

    def check_constant(self, start: int, expected: bytes) -> None:
        """Every line holds these bytes at this offset; else NotInColumnsError."""
        for offset, byte in enumerate(expected, start):
            require(self.byte_column(offset) == byte)

    def check_tail(self) -> None:
        """Every line ends as the layout says; else NotInColumnsError."""
        self.check_constant(self.layout.n_bytes - len(self.layout.tail), self.layout.tail)

    def note_round_ends(self, round_ends: list[bool]) -> None:
        """Note for each number column whether the last decimal is 0 in some line."""
        for i, column in enumerate(self.layout.numbers):
            if not round_ends[i]:
                last = column.stop - 1 - (_EXPONENT_WIDTH if column.exponent else 0)
                round_ends[i] = bool((self.byte_column(last) == ord("0")).any())

    def texts(self, column: NumberColumn, lines: IntArray) -> list[bytes]:
        """The column of the given lines as text that `float` reads."""
        data, width = self._buffer.data, self.layout.n_bytes
        return [
            bytes(data[WORD + i * width + column.start : WORD + i * width + column.stop])
            .replace(b"D", b"E")
            .replace(b"d", b"e")
            for i in lines.tolist()
        ]


def read_numbers(lines: FixedLines, column: NumberColumn) -> FloatArray:
    """(n_lines,) the numbers of one column, bit for bit what `float(text)` gives.

    Raises
    ------
    NotInColumnsError
        Any line that is not blanks, an optional minus sign, digits, point, `decimals` digits
        (and the exponent, where the column has one).
    """
    end = column.stop - (_EXPONENT_WIDTH if column.exponent else 0)
    point = end - column.decimals - 1
    lines.check_constant(point, b".")
    if column.exponent and point - column.start > 1:
        before = lines.byte_column(point - 2)
        require((before == ord(" ")) | (before == ord("-")))
    whole, negative = _whole_parts(lines, column.start, point)
    mantissa = _digits(lines, point + 1, end)
    inexact = np.full(lines.n_lines, column.decimals > _MAX_EXACT_DECIMALS)
    if whole is not None:
        inexact |= whole >= np.uint64((1 << 53) // 10**column.decimals)
        mantissa += whole * np.uint64(10 ** min(column.decimals, _MAX_EXACT_DECIMALS))
    values = mantissa.astype(np.float64)
    if column.exponent:
        powers = _exponents(lines, end, column.exponent) - column.decimals
        inexact |= np.abs(powers) > _MAX_EXACT_POWER
        scale = _POWERS[np.where(inexact, 0, np.abs(powers))]
        values = np.where(powers < 0, values / scale, values * scale)
    else:
        values /= _POWERS[min(column.decimals, _MAX_EXACT_POWER)]
    bits = values.view(np.uint64)
    bits |= negative.astype(np.uint64) << np.uint64(63)
    slow = np.flatnonzero(inexact)
    if slow.size:
        values[slow] = [float(text) for text in lines.texts(column, slow)]
    return values


def read_integers(lines: FixedLines, start: int, stop: int, rows: slice) -> IntArray:
    """Right-aligned integers in the bytes [start, stop) of some of the lines.

    Raises
    ------
    NotInColumnsError
        Anything but blanks, an optional minus sign and at most 8 digits.
    """
    *front, last = reversed(lines.span_words(start, stop))
    for words in front:
        require(words[rows] == SPACES)
    magnitude, negative = signed_value(last[rows])
    values = magnitude.astype(np.int64)
    return np.where(negative, -values, values)


def _digits(lines: FixedLines, start: int, stop: int) -> WordArray:
    """Value of the digits [start, stop); checked, but meaningless, beyond 19 of them."""
    value = np.zeros(lines.n_lines, dtype=np.uint64)
    for end in range(stop, start, -WORD):
        part = digits_value(lines.words(max(start, end - WORD), end, b"0"))
        value += part * np.uint64(10 ** min(stop - end, 19))
    return value


def _whole_parts(lines: FixedLines, start: int, stop: int) -> tuple[WordArray | None, BoolArray]:
    """What stands before the point: magnitude (None if zero in every line), and the minus sign.

    Nearly all elements of a Hamiltonian are below 1 eV, so `0` and `-0` are recognised at once
    and only the rest is looked at in detail.
    """
    for front in lines.span_words(start, stop - WORD):
        require(front == SPACES)
    words = lines.words(max(start, stop - WORD), stop)
    negative = words == MINUS_ZERO
    rest = np.flatnonzero(~(negative | (words == ZERO)))
    if not rest.size:
        return None, negative
    magnitude = np.zeros(lines.n_lines, dtype=np.uint64)
    magnitude[rest], negative[rest] = signed_value(words[rest])
    return magnitude, negative


def _exponents(lines: FixedLines, start: int, letter: bytes) -> IntArray:
    """Exponents written as letter, sign and two digits."""
    lines.check_constant(start, letter)
    sign = lines.byte_column(start + 1)
    minus = sign == ord("-")
    require(minus | (sign == ord("+")))
    size = _digits(lines, start + 2, start + 4).astype(np.int64)
    return np.where(minus, -size, size)
