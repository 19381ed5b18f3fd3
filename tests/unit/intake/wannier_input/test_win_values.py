"""Fortran numbers, lists and ranges."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from topovet.intake.wannier_input.win_grammar import Line
from topovet.intake.wannier_input.win_values import read_ranges, split_items, to_float, to_int


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("1", 1.0), ("+1.", 1.0), (".5", 0.5), ("-1.5e-3", -0.0015), ("1.0d0", 1.0),
        ("2.5D+02", 250.0), ("1q1", 10.0), ("1d-400", 0.0),
    ],
)  # fmt: skip
def test_fortran_reals(text: str, value: float) -> None:
    assert to_float(text) == value


@pytest.mark.parametrize(
    "text",
    ["", ".", "e5", "1.0e", "1_0", "0x1", "nan", "Infinity", "1e999", "****", "1/3", "3*0", "١"],
)
def test_what_is_no_finite_real(text: str) -> None:
    assert to_float(text) is None


@pytest.mark.parametrize("text", ["", "1.0", "1_0", "--1", "1" * 10, "1" * 5000, "٣"])
def test_what_is_no_integer(text: str) -> None:
    assert to_int(text) is None


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_printed_floats_come_back(value: float) -> None:
    assert to_float(repr(value)) == value
    assert to_float(f"{value:.17E}".replace("E", "D")) == value


@given(st.lists(st.integers(-99, 99), min_size=1), st.sampled_from([" ", ",", ", ", " , ", "\t"]))
def test_lists_with_any_separator(numbers: list[int], separator: str) -> None:
    assert [to_int(item) for item in split_items(separator.join(map(str, numbers)))] == numbers


@given(st.lists(st.integers(1, 300), unique=True, min_size=1), st.data())
def test_ranges_stand_for_their_numbers(numbers: list[int], data: st.DataObject) -> None:
    runs: list[list[int]] = []
    for number in numbers:
        if runs and number == runs[-1][-1] + 1:
            runs[-1].append(number)
        else:
            runs.append([number])
    dash = data.draw(st.sampled_from(["-", ":", " - "]))
    parts = [str(run[0]) if len(run) == 1 else f"{run[0]}{dash}{run[-1]}" for run in runs]
    text = data.draw(st.sampled_from([" ", ",", "; "])).join(parts)
    assert read_ranges("x.win", Line(1, text), "exclude_bands") == numbers
