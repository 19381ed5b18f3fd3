"""Which lines are damage and which are a free layout."""

from __future__ import annotations

import pytest

from topovet.errors import InputError
from topovet.intake.hamiltonian.line_tally import LineTally
from topovet.intake.hamiltonian.line_words import LineParser


def tally(lines: list[str]) -> LineTally:
    parser = LineParser("file", ("i", "x"), 1)
    for line_no, line in enumerate(lines, 1):
        parser.words(line.encode(), line_no)
    parser.settle()
    return parser.tally


def lawful(lines: list[str]) -> bool:
    try:
        tally(lines).check()
    except InputError:
        return False
    return True


COLUMNS = [f"{i:5d}{(-1) ** i * i / 7:12.6f}" for i in range(40)]


def test_regular_columns_are_lawful() -> None:
    assert lawful(COLUMNS)


@pytest.mark.parametrize(
    "odd",
    [
        "   5   -0.714286",  # a blank lost
        "    5   -0.71428",  # a digit lost
        "     5   -0.714286",  # a blank added
        "    5   -0.7142866",  # a digit added
        "    5  -10.7142866",
        "    5     -7142.0",
        "    5      -0.7E-01",
    ],
)
def test_one_line_unlike_the_others_is_damage(odd: str) -> None:
    assert not lawful([*COLUMNS[:5], odd, *COLUMNS[6:]])


def test_the_first_odd_line_is_named() -> None:
    lines = [*COLUMNS]
    lines[7], lines[20] = lines[7][1:], lines[20][1:]
    with pytest.raises(InputError, match="file, line 8: found columns ending at 4, 16 in"):
        tally(lines).check()


@pytest.mark.parametrize(
    "lines",
    [
        [f"{i} {i / 7:.6f}" for i in range(200)],
        [f"{i} {i / 7!r}" for i in range(200)],
        [f"{i} {i / 7:.5g}" for i in range(1, 200)],
        [f"{i:5d}  {-i * 1e-6!r}" for i in range(200)],  # some with exponent
        [f"{i:5d} {i / 7: .8f}" for i in range(75)],  # the last few are wider
        [f"{i:3d} {1.5:9.6f}" for i in range(990, 1010)],  # a column that becomes too narrow
        ["0 0.0", *["1 -0.3333"] * 6],  # a model made by hand
        ["0 0.5", "1 -0.25", "2 1"],
    ],
)
def test_free_layouts_are_lawful(lines: list[str]) -> None:
    assert lawful(lines)


def test_lost_decimals_where_all_have_the_same() -> None:
    lines = [f"{i} {i / 8:.6f}" for i in range(50)]
    assert lawful(lines)
    assert not lawful([*lines, "50 6.25000"])
    assert not lawful([*lines, "50 6.250000E-01"])
    assert not lawful([*lines, "50 6.250-100"])


def test_lost_digits_of_exponents() -> None:
    lines = [f"{i} {i / 8:.6e}" for i in range(50)]
    assert lawful(lines)
    assert lawful([*lines, "50 6.250000-101"])  # Fortran's way with three digits
    assert not lawful([*lines, "50 6.25000e-01"])
    assert not lawful([*lines, "50 6.250000e-1"])


@pytest.mark.parametrize(
    "line",
    ["01 0.5", "1 .5", "1 00.5", "1 12.5E-01", "1 1.5E01", "1 1.5-01", "1 123456", "1 1_0.5"],
)
def test_words_that_no_program_writes(line: str) -> None:
    with pytest.raises(InputError):
        tally([line])


@pytest.mark.parametrize("word", ["1.5", "-0.5", "+0.5", "2", "-0", "1.", "1e-05", "1.5D+00"])
def test_words_that_programs_write(word: str) -> None:
    parser = LineParser("file", ("i", "x"), 1)
    assert parser.words(f"1 {word}".encode(), 1) == [b"1", word.encode()]
    assert parser.to_float(word.encode(), 1) == float(word.replace("D", "E"))


def test_a_number_beyond_double_precision_is_refused() -> None:
    parser = LineParser("file", ("i", "x"), 1)
    parser.words(b"1 1E+999", 1)
    with pytest.raises(InputError, match="that double precision can hold"):
        parser.to_float(b"1E+999", 1)
