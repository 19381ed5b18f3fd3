"""What a user is told about a damaged `_hr.dat` or `_tb.dat`, word for word."""

from __future__ import annotations

import gzip
from pathlib import Path

import pytest
from hamiltonian_text import FORMATS, hr_lines, tb_lines, text

from topovet.errors import InputError
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.hamiltonian.tb import read_tb

HR = hr_lines(n_wann=3, n_r=5)
TB = tb_lines(n_wann=3, n_r=3)
FREE = hr_lines(FORMATS["single blanks"], n_wann=3, n_r=5)


def with_line(lines: list[str], number: int, line: str) -> bytes:
    """The file with another line in place of the one of this number."""
    return text([*lines[: number - 1], line, *lines[number:]])


def without_line(lines: list[str], number: int) -> bytes:
    return text([*lines[: number - 1], *lines[number:]])


ELEMENT = HR[10]
assert ELEMENT == "   -2    0    0    1    3   -0.016991    2.332980"

DAMAGED_HR = {
    "cut after a line": (
        text(HR[:20]),
        "x_hr.dat, line 20: found the end of the file after 16 of 45 matrix elements, expected "
        "5 R vectors of 3 x 3 elements; copy the file again, or check num_wann and nrpts at its "
        "top.",
    ),
    "cut within a line": (
        text(HR)[:700],
        'x_hr.dat, line 17: found the cut line "   -1    4    0    1    2    0." after 12 of 45 '
        "matrix elements, expected 5 R vectors of 3 x 3 elements; copy the file again, or check "
        "num_wann and nrpts at its top.",
    ),
    "cut near the top": (
        text(HR[:6]),
        "x_hr.dat, line 6: found the end of the file after 2 more lines, expected 45 matrix "
        "elements (5 R vectors of 3 x 3); copy the file again, or check num_wann and nrpts at its "
        "top.",
    ),
    "last digits may be missing": (
        b"toy\n1\n2\n1 1\n0 0 0 1 1 0.1 0\n1 0 0 1 1 -0.25 0.125",
        'x_hr.dat, line 6: found the last line "1 0 0 1 1 -0.25 0.125" without a line end, '
        "perhaps cut, expected a line end; copy the file again, or end that line if it is whole.",
    ),
    "not a number": (
        with_line(HR, 11, ELEMENT[:25] + "         NaN    2.332980"),
        'x_hr.dat, line 11: found a number that is not finite in "   -2    0    0    1    3      '
        '   NaN    2.332980", expected finite numbers; see what went wrong in the run that wrote '
        "it.",
    ),
    "overflow": (
        with_line(HR, 11, ELEMENT[:25] + "************    2.332980"),
        "x_hr.dat, line 11: found asterisks, a number too wide for its column, in "
        '"   -2    0    0    1    3************    2.332980", expected numbers; see what went '
        "wrong in the run that wrote it.",
    ),
    "num_wann too large": (
        with_line(HR, 2, "           4"),
        "x_hr.dat, line 14: found R = (-1, 4, 0) after 9 of the 16 elements of R = (-2, 0, 0), "
        "expected all pairs (m, n) of (-2, 0, 0) together; restore the missing or damaged line, "
        "or check num_wann at the top of the file.",
    ),
    "num_wann too small": (
        with_line(HR, 2, "           2"),
        "x_hr.dat, line 7: found (m, n) = (3, 1), expected numbers from 1 to 2; check num_wann at "
        "the top of the file, and this line for damage.",
    ),
    "nrpts too large": (
        with_line(HR, 3, "           6"),
        "x_hr.dat, line 5: found a list of 5 degeneracies, expected 6, as nrpts above it says; "
        "check nrpts, and the file for damage.",
    ),
    "nrpts too small": (
        with_line(HR, 3, "           4"),
        "x_hr.dat, line 4: found a list of 5 degeneracies, expected 4, as nrpts above it says; "
        "check nrpts, and the file for damage.",
    ),
    "degeneracy 0": (
        with_line(HR, 4, "    1    1    0    1    1"),
        'x_hr.dat, line 4: found "0" in the list of degeneracies, expected 5 positive integers; '
        "check nrpts above the list, and the file for damage.",
    ),
    "a line lost": (
        without_line(HR, 11),
        "x_hr.dat, line 13: found R = (-1, 4, 0) after 8 of the 9 elements of R = (-2, 0, 0), "
        "expected all pairs (m, n) of (-2, 0, 0) together; restore the missing or damaged line, "
        "or check num_wann at the top of the file.",
    ),
    "a pair twice": (
        with_line(HR, 11, ELEMENT.replace("    1    3", "    2    2")),
        "x_hr.dat, line 11: found (m, n) = (2, 2) once more for R = (-2, 0, 0), expected each "
        "pair once; mend that line, or write the file again.",
    ),
    "a line too many": (
        text([*HR, HR[-1]]),
        'x_hr.dat, line 50: found "2   -7    0    3    3    0.009019    0.000000" after the last '
        "of 45 matrix elements, expected the end of the file; check num_wann and nrpts at the "
        "top of the file, and the file for damage.",
    ),
    "a digit lost": (
        with_line(HR, 11, ELEMENT[:-1]),
        "x_hr.dat, line 11: found columns ending at 5, 10, 15, 20, 25, 37, 48 in "
        '"   -2    0    0    1    3   -0.016991    2.33298", expected columns ending at '
        "5, 10, 15, 20, 25, 37, 49 as in the other lines; mend that line, or write the file again.",
    ),
    "a digit lost in free columns": (
        with_line(FREE, 10, FREE[9][:-1]),
        'x_hr.dat, line 10: found a number with 5 decimals in "-2 0 0 3 2 0.018043 0.76459", '
        "expected 6 decimals as in the other lines; mend that line, or write the file again.",
    ),
    "decimal comma": (
        with_line(HR, 11, ELEMENT.replace(".", ",")),
        'x_hr.dat, line 11: found "-0,016991" for Re, expected a number like -0.25; mend that '
        "line, or write the file again.",
    ),
    "rubbish": (
        with_line(HR, 11, ELEMENT).replace(b"2.332980", b"2.3\x80\x00980"),
        'x_hr.dat, line 11: found bytes that are no text in "   -2    0    0    1    3   '
        '-0.016991    2.3\ufffd\\x00980", expected 7 columns (R1 R2 R3 m n Re Im); mend that '
        "line, or write the file again.",
    ),
    "a web page": (
        b"<!DOCTYPE html>\n<html>\n<body>\n",
        'x_hr.dat, line 2: found "<html>", expected num_wann, the number of Wannier functions, a '
        "positive integer; check that this is the right file and that its top is undamaged.",
    ),
    "nothing": (
        b"",
        "x_hr.dat: found an empty file, expected data; write or copy the file again.",
    ),
    "a promise of 900 million elements": (
        b"x\n30000\n1\n1\n    0    0    0    1    1    0.000000    0.000000\n",
        "x_hr.dat, line 5: found the end of the file after 1 more line, expected 900000000 "
        "matrix elements (1 R vectors of 30000 x 30000); copy the file again, or check num_wann "
        "and nrpts at its top.",
    ),
    "cut gzip": (
        gzip.compress(text(HR))[:300],
        "x_hr.dat: found gzip data that ends too early, expected a whole gzip file; copy or "
        "compress the file again.",
    ),
}

DAMAGED_TB = {
    "a cell without volume": (
        with_line(TB, 3, TB[1]),
        "x_tb.dat, line 4: found lattice vectors that span no volume, expected three independent "
        "vectors in angstrom; check that this is the right file and that its top is undamaged.",
    ),
    "cut in the positions": (
        text(TB[:60]),
        "x_tb.dat, line 60: found the end of the file after 16 of 27 position matrix elements, "
        "expected 3 R vectors of 3 x 3 elements; copy the file again, or check num_wann and nrpts "
        "at its top.",
    ),
    "a line lost": (
        without_line(TB, 13),
        'x_tb.dat, line 19: found 3 columns in "    0    0    0", expected 4 columns '
        "(m n Re Im); mend that line, or write the file again.",
    ),
    "positions in another order": (
        with_line(TB, 42, "    9    0    0"),
        "x_tb.dat, line 42: found positions for R = (9, 0, 0), expected R = (-1, 0, 0), in the "
        "order of the Hamiltonian's blocks; write the file again.",
    ),
    "an exponent without sign": (
        with_line(TB, 12, "    2    1    1.00000000E-03  2.00000000E001"),
        'x_tb.dat, line 12: found "2.00000000E001" for Im, expected a number like -0.25; mend '
        "that line, or write the file again.",
    ),
}


@pytest.mark.parametrize("fast", [True, False])
@pytest.mark.parametrize("damage", DAMAGED_HR)
def test_damaged_hr(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, damage: str, fast: bool
) -> None:
    content, message = DAMAGED_HR[damage]
    monkeypatch.chdir(tmp_path)
    Path("x_hr.dat").write_bytes(content)
    with pytest.raises(InputError) as caught:
        read_hr("x_hr.dat", fast=fast)
    assert str(caught.value) == message


@pytest.mark.parametrize("fast", [True, False])
@pytest.mark.parametrize("damage", DAMAGED_TB)
def test_damaged_tb(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, damage: str, fast: bool
) -> None:
    content, message = DAMAGED_TB[damage]
    monkeypatch.chdir(tmp_path)
    Path("x_tb.dat").write_bytes(content)
    with pytest.raises(InputError) as caught:
        read_tb("x_tb.dat", fast=fast)
    assert str(caught.value) == message


def test_the_undamaged_files_are_read(tmp_path: Path) -> None:
    """Otherwise the tests above would prove little."""
    path = tmp_path / "x"
    for lines, read in ((HR, read_hr), (FREE, read_hr), (TB, read_tb)):
        path.write_bytes(text(lines))
        read(path)
