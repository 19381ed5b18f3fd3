"""Digits as words: every character checked, every number that of float(text)."""

from __future__ import annotations

import io

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from topovet.intake.hamiltonian.digit_words import NotInColumnsError, digits_value, signed_value
from topovet.intake.hamiltonian.fixed_columns import (
    FixedLines,
    infer_layout,
    read_integers,
    read_numbers,
)


def words(*texts: bytes) -> np.ndarray:
    return np.frombuffer(b"".join(texts), dtype="<u8").astype(np.uint64)


def lines_of(texts: list[str], n_integers: int, n_numbers: int) -> FixedLines:
    content = "".join(text + "\n" for text in texts).encode()
    layout = infer_layout(texts[0].encode() + b"\n", n_integers, n_numbers)
    assert layout is not None
    lines = FixedLines(layout, len(texts))
    assert lines.fill(io.BytesIO(content), len(texts))
    return lines


@given(st.integers(0, 99_999_999))
def test_eight_digits(value: int) -> None:
    assert digits_value(words(b"%08d" % value)).tolist() == [value]


def test_every_other_byte_in_every_place_is_no_digit() -> None:
    for place in range(8):
        for byte in set(range(256)) - set(b"0123456789"):
            text = bytearray(b"19283746")
            text[place] = byte
            with pytest.raises(NotInColumnsError):
                digits_value(words(bytes(text)))


@given(st.integers(-9_999_999, 99_999_999))
def test_signed(value: int) -> None:
    magnitude, negative = signed_value(words(b"%8d" % value))
    assert magnitude.tolist() == [abs(value)]
    assert negative.tolist() == [value < 0]


@given(st.text(" -+0123456789.:p\x10", min_size=8, max_size=8))
@settings(max_examples=400)
def test_signed_takes_what_a_program_prints_and_nothing_else(text: str) -> None:
    stripped = text.lstrip(" ")
    digits = stripped.removeprefix("-")
    lawful = digits.isdigit() and (digits == "0" or digits[0] != "0")
    try:
        magnitude, negative = signed_value(words(text.encode()))
    except NotInColumnsError:
        assert not lawful
    else:
        assert lawful
        assert magnitude.tolist() == [int(digits)]
        assert negative.tolist() == [stripped.startswith("-")]


@given(
    values=st.lists(st.floats(-9000, 9000), min_size=1, max_size=5),
    decimals=st.integers(1, 20),
    width=st.integers(0, 8),
)
@settings(max_examples=200, deadline=None)
def test_numbers_are_those_of_float(values: list[float], decimals: int, width: int) -> None:
    width += decimals + 9
    texts = [f"{value:{width}.{decimals}f}" for value in values]
    lines = lines_of([f"    1{text}" for text in texts], 1, 1)
    found = read_numbers(lines, lines.layout.numbers[0])
    assert found.tobytes() == np.array([float(text) for text in texts]).tobytes()


@given(
    values=st.lists(
        st.floats(allow_nan=False, allow_infinity=False).filter(
            lambda x: x == 0 or 1e-98 < abs(x) < 1e98
        ),
        min_size=1,
        max_size=5,
    ),
    decimals=st.integers(1, 20),
    letter=st.sampled_from("eEdD"),
)
@settings(max_examples=200, deadline=None)
def test_exponents_are_those_of_float(values: list[float], decimals: int, letter: str) -> None:
    texts = [f"{value:{decimals + 12}.{decimals}e}" for value in values]
    lines = lines_of([f"    1{text.replace('e', letter)}" for text in texts], 1, 1)
    found = read_numbers(lines, lines.layout.numbers[0])
    assert found.tobytes() == np.array([float(text) for text in texts]).tobytes()


@pytest.mark.parametrize("width", [2, 5, 8, 11])
def test_integers(width: int) -> None:
    values = [0, -1, 7, 42, 9]
    texts = [f"{value:{width}d}   0.5" for value in values]
    lines = lines_of(texts, 1, 1)
    assert read_integers(lines, 0, width, slice(None)).tolist() == values
    assert read_integers(lines, 0, width, slice(None, None, 2)).tolist() == values[::2]


@pytest.mark.parametrize(
    "second",
    [
        "    1     .500000",  # no digit before the point
        "    1   0.5 00000",
        "    1   0,5000000",
        "    1   - 0.50000",
        "    1    --.50000",
        "    1   00.500000",  # superfluous 0
        "    1    0.50000 ",
        "    1    0.50000x",
        "    1    +.500000",
    ],
)
def test_odd_numbers_are_not_in_columns(second: str) -> None:
    lines = lines_of(["    1    0.500000", second.ljust(17)[:17]], 1, 1)
    with pytest.raises(NotInColumnsError):
        read_numbers(lines, lines.layout.numbers[0])


@pytest.mark.parametrize(
    "line",
    [
        b"1 2 -0.5\n",  # single blanks: no columns to be seen
        b"    1    2\n",
        b"    1    2    5\n",
        b"    1    2    0.5",
        b"    1    2    0.5\t\n",
        b"    1    2    12.5E-01\n",  # no program writes two digits before an exponent
        b"    1    2    0.5" + b" " * 600 + b"\n",
    ],
)
def test_no_layout(line: bytes) -> None:
    assert infer_layout(line, 2, 1) is None


def test_a_last_line_without_line_end_is_whole() -> None:
    layout = infer_layout(b"    1    0.5\r\n", 1, 1)
    assert layout is not None
    lines = FixedLines(layout, 2)
    content = b"    1    0.5\r\n    1   -0.5"
    assert not lines.fill(io.BytesIO(content), 2)
    assert lines.fill(io.BytesIO(content), 2, final=True)
    lines.check_tail()
    assert read_numbers(lines, layout.numbers[0]).tolist() == [0.5, -0.5]
    assert not lines.fill(io.BytesIO(content[:-1]), 2, final=True)
