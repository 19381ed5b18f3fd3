"""ASCII digits eight at a time: text as 64-bit words, first character in the lowest byte.

Working on whole arrays of words, a few integer operations check and convert eight characters of
every line of a file at once.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

WordArray = NDArray[np.uint64]

WORD = 8
"""Characters in a word."""


class NotInColumnsError(Exception):
    """Some byte is not what the layout asks for; never leaves this package."""


def require(condition: NDArray[np.bool_]) -> None:
    """Raise NotInColumnsError unless the condition holds everywhere."""
    if not condition.all():
        raise NotInColumnsError


def word_of(text: bytes) -> np.uint64:
    """Up to eight characters as a word, filled up with blanks in front."""
    word: np.uint64 = np.uint64(int.from_bytes(text.rjust(WORD), "little"))
    return word


def fill_front(words: WordArray, n_front: int, character: bytes) -> None:
    """Overwrite the first n_front characters of every word, in place."""
    front = (1 << 8 * n_front) - 1
    words &= np.uint64(~front & _ALL_BITS)
    words |= word_of(character * WORD) & np.uint64(front)


def digits_value(words: WordArray) -> WordArray:
    """Value of words of eight digits each, in place of the words.

    The check: only for the bytes 0x30..0x39 do the high nibbles of the byte and of the byte + 6
    have exactly the bits 0011 in common. Neighbouring digits, then pairs, then fours are joined
    by one multiplication each, which adds the left half, times 10, 100 or 10000, to the right.

    Raises
    ------
    NotInColumnsError
        A character that is no digit.
    """
    require((words & (words + _SIXES) & _HIGH_NIBBLES) == NOUGHTS)
    words &= _LOW_NIBBLES
    words *= np.uint64(10 * (1 << 8) + 1)
    words >>= np.uint64(8)
    words &= np.uint64(0x00FF00FF00FF00FF)
    words *= np.uint64(100 * (1 << 16) + 1)
    words >>= np.uint64(16)
    words &= np.uint64(0x0000FFFF0000FFFF)
    words *= np.uint64(10000 * (1 << 32) + 1)
    words >>= np.uint64(32)
    return words


def signed_value(words: WordArray) -> tuple[WordArray, NDArray[np.bool_]]:
    """Magnitude and minus sign of words of blanks, an optional minus sign, and digits.

    Raises
    ------
    NotInColumnsError
        Anything else, also digits that begin with a superfluous 0.
    """
    # Of the characters allowed here only digits have bit 0x10; others fail the checks below.
    digit_bytes = ((words >> np.uint64(4)) & _ONES) * np.uint64(255)
    front_bytes = ~digit_bytes
    # The front bytes stand before all digits, and there is a digit.
    require(((front_bytes + np.uint64(1)) & front_bytes == 0) & (digit_bytes != 0))
    last_front_byte = front_bytes ^ (front_bytes >> np.uint64(8))
    not_blank = (words ^ SPACES) & front_bytes
    negative = not_blank != 0
    require(~negative | (not_blank == (_BLANK_TO_MINUS & last_front_byte)))
    first_digit = digit_bytes & ~(digit_bytes << np.uint64(8))
    single = digit_bytes == first_digit
    require(single | ((words & first_digit) != (NOUGHTS & first_digit)))
    return digits_value((words & digit_bytes) | (NOUGHTS & front_bytes)), negative


_ALL_BITS = (1 << 64) - 1
SPACES, NOUGHTS = word_of(b" " * WORD), word_of(b"0" * WORD)
ZERO, MINUS_ZERO = word_of(b"0"), word_of(b"-0")
_BLANK_TO_MINUS = SPACES ^ word_of(b"-" * WORD)
_HIGH_NIBBLES, _LOW_NIBBLES = word_of(b"\xf0" * WORD), word_of(b"\x0f" * WORD)
_SIXES, _ONES = word_of(b"\x06" * WORD), word_of(b"\x01" * WORD)
