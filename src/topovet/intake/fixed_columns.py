"""Numbers in fixed columns, many lines at once, every byte looked at.

Lines that all share one layout (Wannier90's `5I5,2F12.6`, or another code's widths) are kept as
one block of bytes. Eight neighbouring bytes of every line are taken as one 64-bit word, so that
comparing, checking and converting digits are a few integer operations on whole columns. A
number is an integer mantissa divided by a power of ten; with both below 2**53 and 1e22 that
division is correctly rounded, hence bit for bit what `float(text)` gives. Numbers beyond that
range are converted one by one with `float`.

Anything unexpected raises `NotInColumnsError`; it is for the caller to look closer.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import BinaryIO

import numpy as np
from numpy.typing import NDArray

from topovet.arrays import FloatArray, IntArray

WordArray = NDArray[np.uint64]
ByteArray = NDArray[np.uint8]

WORD = 8
_MAX_EXACT_DECIMALS = 15
_MAX_EXACT_POWER = 22
_LONGEST_LINE = 512
_NUMBER = re.compile(rb"-?\d+\.(\d+)(?:([EDed])[-+]\d\d)?")
_POWERS = 10.0 ** np.arange(_MAX_EXACT_POWER + 1)


class NotInColumnsError(Exception):
    """Some byte is not what the layout asks for; never leaves this package."""


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
        E, D, e or d, followed by a sign and two digits; empty in plain decimal form.
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
    """The layout that one line (with its line end) suggests, or None.

    Columns end where the blank-separated words end. Where words touch and cannot be counted,
    `usual_stops` is tried if it has the line's length.
    """
    if len(line) > _LONGEST_LINE:
        return None
    body = line.rstrip(b" \r\n")
    stops = tuple(word.end() for word in re.finditer(rb"[^ ]+", body))
    if len(stops) != n_integers + n_numbers:
        if not usual_stops or len(body) != usual_stops[-1]:
            return None
        stops = usual_stops
    numbers = []
    for start, stop in zip(stops[n_integers - 1 :], stops[n_integers:], strict=False):
        match = _NUMBER.fullmatch(body[start:stop].strip(b" "))
        if match is None:
            return None
        numbers.append(NumberColumn(start, stop, len(match[1]), match[2] or b""))
    tail = line[stops[-1] :]
    if tail.lstrip(b" ") not in (b"\n", b"\r\n"):
        return None
    return LineLayout(len(line), tail, stops[:n_integers], tuple(numbers))


class FixedLines:
    """A reusable buffer of lines of one layout; methods look at the lines filled in last."""

    def __init__(self, layout: LineLayout, max_lines: int) -> None:
        self.layout = layout
        self.n_lines = 0
        self._n_read = 0
        # One word of slack in front: the words of the first columns begin before the line does.
        self._buffer = np.zeros(WORD + max_lines * layout.n_bytes, dtype=np.uint8)

    def fill(self, stream: BinaryIO, n_lines: int, *, first: bytes = b"") -> bool:
        """Take the next lines from `first`, then from the stream; False where too few follow.

        A last line that lacks nothing but its line end counts as whole.
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
        line_end = self.layout.tail.lstrip(b" ")
        if n_bytes - n_read == len(line_end):
            target[n_read:] = line_end
            n_read = n_bytes
        self.n_lines, self._n_read = n_lines, n_read
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
        """(n_lines,) the byte at this offset of every line."""
        bytes_: ByteArray = np.ndarray(
            (self.n_lines,), np.uint8, self._buffer.data, WORD + offset, (self.layout.n_bytes,)
        )
        return bytes_

    def words(self, start: int, stop: int, blank: bytes = b" ") -> WordArray:
        """(n_lines,) bytes [start, stop), at most 8, as words filled up in front with `blank`."""
        words: WordArray = np.ndarray(
            (self.n_lines,), "<u8", self._buffer.data, stop, (self.layout.n_bytes,)
        ).astype(np.uint64)
        n_foreign = WORD - (stop - start)
        if n_foreign:
            foreign = (1 << 8 * n_foreign) - 1
            words &= np.uint64(~foreign & _ALL_BITS)
            words |= np.uint64(_repeated(blank) & foreign)
        return words

    def span_words(self, start: int, stop: int) -> list[WordArray]:
        """The bytes [start, stop) of every line as as many word columns as it takes."""
        return [self.words(max(start, end - WORD), end) for end in range(stop, start, -WORD)]

    def check_constant(self, start: int, expected: bytes) -> None:
        """Every line holds these bytes at this offset."""
        for offset, byte in enumerate(expected, start):
            _require(self.byte_column(offset) == byte)

    def texts(self, column: NumberColumn, lines: IntArray) -> list[bytes]:
        """The column of the given lines as text that `float` reads."""
        width = self.layout.n_bytes
        data = self._buffer.data
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
    point = column.stop - column.decimals - 1 - (4 if column.exponent else 0)
    lines.check_constant(point, b".")
    whole, negative = _whole_parts(lines, column.start, point)
    mantissa = _digits(lines, point + 1, point + 1 + column.decimals)
    inexact = np.full(lines.n_lines, column.decimals > _MAX_EXACT_DECIMALS)
    if whole is not None:
        inexact |= whole >= np.uint64((1 << 53) // 10**column.decimals)
        mantissa += whole * np.uint64(10 ** min(column.decimals, _MAX_EXACT_DECIMALS))
    values = mantissa.astype(np.float64)
    if column.exponent:
        powers = _exponents(lines, column.stop - 4, column.exponent) - column.decimals
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
    """Right-aligned integers in the bytes [start, stop) of some of the lines."""
    width = stop - start
    texts = np.stack([lines.byte_column(offset)[rows] for offset in range(start, stop)], axis=-1)
    if width > WORD:
        _require(texts[:, : width - WORD] == _BLANK)
        texts = texts[:, width - WORD :]
    padded = np.full((len(texts), WORD), _BLANK, dtype=np.uint8)
    padded[:, WORD - texts.shape[1] :] = texts
    magnitude, negative = _right_aligned(padded.view("<u8")[:, 0].astype(np.uint64))
    values = magnitude.astype(np.int64)
    return np.where(negative, -values, values)


_BLANK = ord(" ")
_ALL_BITS = (1 << 64) - 1


def _repeated(byte: bytes) -> int:
    return int.from_bytes(byte * WORD, "little")


def _word(text: bytes) -> np.uint64:
    word: np.uint64 = np.uint64(int.from_bytes(text.rjust(WORD), "little"))
    return word


_ZERO, _MINUS_ZERO = _word(b"0"), _word(b"-0")
_SPACES, _NOUGHTS = np.uint64(_repeated(b" ")), np.uint64(_repeated(b"0"))
_BLANK_TO_MINUS = np.uint64(_repeated(bytes([ord(" ") ^ ord("-")])))
_HIGH_NIBBLES, _SIXES = np.uint64(_repeated(b"\xf0")), np.uint64(_repeated(b"\x06"))
_ONES, _BYTE = np.uint64(_repeated(b"\x01")), np.uint64(255)
_SHIFT_4, _SHIFT_8, _SHIFT_16, _SHIFT_32 = (np.uint64(n) for n in (4, 8, 16, 32))


def _require(condition: NDArray[np.bool_]) -> None:
    if not condition.all():
        raise NotInColumnsError


def _digits_value(words: WordArray) -> WordArray:
    """Value of words of eight ASCII digits each; the words are used up.

    The check: only for the bytes 0x30..0x39 do the high nibbles of the byte and of the byte + 6
    have exactly the bits 0011 in common. Neighbouring digits, then pairs, then fours are joined
    by one multiplication each, which adds the left half, times 10, 100 or 10000, to the right.
    """
    _require((words & (words + _SIXES) & _HIGH_NIBBLES) == _NOUGHTS)
    words &= np.uint64(_repeated(b"\x0f"))
    words *= np.uint64(10 * (1 << 8) + 1)
    words >>= _SHIFT_8
    words &= np.uint64(0x00FF00FF00FF00FF)
    words *= np.uint64(100 * (1 << 16) + 1)
    words >>= _SHIFT_16
    words &= np.uint64(0x0000FFFF0000FFFF)
    words *= np.uint64(10000 * (1 << 32) + 1)
    words >>= _SHIFT_32
    return words


def _digits(lines: FixedLines, start: int, stop: int) -> WordArray:
    """Value of the digits [start, stop); meaningless, though checked, beyond 19 of them."""
    value = None
    for end in range(stop, start, -WORD):
        part = _digits_value(lines.words(max(start, end - WORD), end, b"0"))
        value = part if value is None else value + part * np.uint64(10 ** min(stop - end, 19))
    if value is None:
        raise NotInColumnsError
    return value


def _whole_parts(
    lines: FixedLines, start: int, stop: int
) -> tuple[WordArray | None, NDArray[np.bool_]]:
    """What stands before the point: magnitude (None if zero in every line), and the minus sign.

    Nearly all elements of a Hamiltonian are below 1 eV, so `0` and `-0` are recognised at once
    and only the rest is looked at in detail.
    """
    for words in lines.span_words(start, stop - WORD):
        _require(words == _SPACES)
    words = lines.words(max(start, stop - WORD), stop)
    negative = words == _MINUS_ZERO
    rest = np.flatnonzero(~(negative | (words == _ZERO)))
    if not rest.size:
        return None, negative
    magnitude = np.zeros(lines.n_lines, dtype=np.uint64)
    magnitude[rest], negative[rest] = _right_aligned(words[rest])
    return magnitude, negative


def _right_aligned(words: WordArray) -> tuple[WordArray, NDArray[np.bool_]]:
    """Magnitude and minus sign of words of blanks, an optional minus sign, and digits."""
    # Among the bytes allowed here only digits have bit 0x10; others fail the checks below.
    digit_bytes = ((words >> _SHIFT_4) & _ONES) * _BYTE
    front_bytes = ~digit_bytes
    # All front bytes stand before all digits, and there is a digit.
    _require(((front_bytes + np.uint64(1)) & front_bytes == 0) & (digit_bytes != 0))
    last_front_byte = front_bytes ^ (front_bytes >> _SHIFT_8)
    odd = (words ^ _SPACES) & front_bytes
    negative = odd != 0
    _require(~negative | (odd == (_BLANK_TO_MINUS & last_front_byte)))
    return _digits_value((words & digit_bytes) | (_NOUGHTS & front_bytes)), negative


def _exponents(lines: FixedLines, start: int, letter: bytes) -> IntArray:
    """Exponents written as letter, sign and two digits."""
    lines.check_constant(start, letter)
    sign = lines.byte_column(start + 1)
    minus = sign == ord("-")
    _require(minus | (sign == ord("+")))
    size = _digits(lines, start + 2, start + 4).astype(np.int64)
    return np.where(minus, -size, size)
