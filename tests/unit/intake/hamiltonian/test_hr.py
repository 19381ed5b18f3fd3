"""Reading `_hr.dat`: the same numbers as float(text), whatever the layout."""

from __future__ import annotations

import gzip
from pathlib import Path

import numpy as np
import pytest
from hamiltonian_text import FORMATS, WANNIER90, hr_lines, text

from topovet.errors import InputError
from topovet.intake.hamiltonian import pair_columns
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.records import HamiltonianFile

N_WANN, N_R = 3, 5
FIRST = 4
"""Index of the first matrix element in `hr_lines()`."""


def read(tmp_path: Path, content: bytes, *, fast: bool = True) -> HamiltonianFile:
    path = tmp_path / "x_hr.dat"
    path.write_bytes(content)
    return read_hr(path, fast=fast)


def slow_twin(lines: list[str]) -> np.ndarray:
    """H[r, m, n] by split and float, nothing checked."""
    n_wann, n_r = int(lines[1]), int(lines[2])
    h_r = np.zeros((n_r, n_wann, n_wann), dtype=complex)
    for i, line in enumerate(lines[3 + -(-n_r // 15) :]):
        words = line.split()
        value = complex(float(words[5]), float(words[6]))
        h_r[i // n_wann**2, int(words[3]) - 1, int(words[4]) - 1] = value
    return h_r


@pytest.mark.parametrize("fast", [True, False])
@pytest.mark.parametrize("layout", FORMATS)
@pytest.mark.parametrize("scale", [0.1, 3.0])
def test_every_layout_is_read_bit_for_bit(
    tmp_path: Path, layout: str, scale: float, fast: bool
) -> None:
    lines = hr_lines(FORMATS[layout], n_wann=12, n_r=17, scale=scale)
    found = read(tmp_path, text(lines), fast=fast)
    assert found.h_r.tobytes() == slow_twin(lines).tobytes()
    assert found.r_cells[:, 0].tolist() == [i - 8 for i in range(17)]
    in_columns = fast and layout != "single blanks"
    assert found.reader == ("fixed-columns" if in_columns else "tolerant")


def test_the_record_says_what_the_file_says(tmp_path: Path) -> None:
    lines = hr_lines()
    lines[3] = "    4    2    1    2    4"
    found = read(tmp_path, text(lines))
    assert found.header == "made for a test"
    assert found.degeneracies.tolist() == [4, 2, 1, 2, 4]
    assert found.n_wann == N_WANN
    assert found.h_r.flags.c_contiguous
    assert not found.h_r.flags.writeable
    assert found.cell is None
    assert found.centres_cart is None


@pytest.mark.parametrize(
    ("layout", "decimals"), [("Wannier90", 6), ("narrow indices", 10), ("exponents", None)]
)
@pytest.mark.parametrize("fast", [True, False])
def test_decimals(tmp_path: Path, layout: str, decimals: int | None, fast: bool) -> None:
    found = read(tmp_path, text(hr_lines(FORMATS[layout])), fast=fast)
    assert found.decimals == decimals


def test_varying_decimals_are_no_decimals(tmp_path: Path) -> None:
    lines = hr_lines("%d %d %d %d %d %r %r")
    found = read(tmp_path, text(lines))
    assert found.decimals is None
    assert found.h_r.tobytes() == slow_twin(lines).tobytes()


@pytest.mark.parametrize("end", ["\n", "\r\n", "  \n", "  \r\n"])
@pytest.mark.parametrize("packed", [False, True])
def test_line_ends_and_compression(tmp_path: Path, end: str, packed: bool) -> None:
    content = text(hr_lines(), end)
    found = read(tmp_path, gzip.compress(content) if packed else content)
    assert found.reader == "fixed-columns"
    assert found.h_r.tobytes() == slow_twin(hr_lines()).tobytes()


def test_minus_zero_keeps_its_sign(tmp_path: Path) -> None:
    lines = hr_lines(n_wann=1, n_r=1)
    lines[FIRST] = WANNIER90 % (0, 0, 0, 1, 1, 0.0, -0.0)
    for fast in (True, False):
        element = read(tmp_path, text(lines), fast=fast).h_r[0, 0, 0]
        assert np.signbit(element.imag)
        assert not np.signbit(element.real)


@pytest.mark.parametrize("steps", [4, 20, 1000])
@pytest.mark.parametrize("n_wann", [1, 3, 7])
def test_steps_of_any_size_give_the_same(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, steps: int, n_wann: int
) -> None:
    """Whole blocks at a time, or columns of a block that is larger than a step."""
    monkeypatch.setattr(pair_columns, "LINES_PER_STEP", steps)
    lines = hr_lines(n_wann=n_wann, n_r=11)
    found = read(tmp_path, text(lines))
    assert found.reader == "fixed-columns"
    assert found.h_r.tobytes() == slow_twin(lines).tobytes()


def test_touching_columns_are_cut_by_column(tmp_path: Path) -> None:
    lines = hr_lines(n_wann=2, n_r=3)
    for i, r_text in enumerate(["-1000-1000    0", "    0    0    0", " 1000 1000    0"]):
        for j in range(FIRST + 4 * i, FIRST + 4 * i + 4):
            lines[j] = r_text + lines[j][15:]
    lines[FIRST + 5] = lines[FIRST + 5][:25] + "-1000.000000-2000.000000"
    for fast in (True, False):
        found = read(tmp_path, text(lines), fast=fast)
        assert found.r_cells.tolist() == [[-1000, -1000, 0], [0, 0, 0], [1000, 1000, 0]]
        assert found.h_r[1, 1, 0] == complex(-1000, -2000)


def test_columns_of_a_touching_first_line_are_taken_from_the_next(tmp_path: Path) -> None:
    lines = hr_lines(FORMATS["narrow indices"], n_wann=2, n_r=1)
    lines[FIRST] = lines[FIRST][:20] + "-1000.0000000000-2000.0000000000"
    for fast in (True, False):
        assert read(tmp_path, text(lines), fast=fast).h_r[0, 0, 0] == complex(-1000, -2000)


def test_pairs_in_any_order_and_blank_lines(tmp_path: Path) -> None:
    lines = hr_lines()
    mixed = lines[:FIRST]
    for start in range(FIRST, len(lines), N_WANN**2):
        mixed += ["", *reversed(lines[start : start + N_WANN**2])]
    found = read(tmp_path, text(mixed))
    assert found.reader == "tolerant"
    assert found.h_r.tobytes() == slow_twin(lines).tobytes()


def test_blank_lines_and_comments_may_follow_the_end(tmp_path: Path) -> None:
    content = text([*hr_lines(), "", "# made by hand", "! indeed"])
    assert read(tmp_path, content).reader == "fixed-columns"


@pytest.mark.parametrize("number", ["%d %d %d %d %d %.8e %.8e", "%5d%5d%5d%5d%5d%15.7E%15.7E"])
@pytest.mark.parametrize("letter", ["e", "E", "d", "D"])
def test_fortran_and_c_exponents(tmp_path: Path, number: str, letter: str) -> None:
    lines = hr_lines(number)
    written = [line.replace("e", letter).replace("E", letter) for line in lines[FIRST:]]
    found = read(tmp_path, text([*lines[:FIRST], *written]))
    assert found.h_r.tobytes() == slow_twin(lines).tobytes()


def test_exponents_too_large_for_exact_powers(tmp_path: Path) -> None:
    """Beyond 1e22 the fast path converts one by one; Fortran drops the E beyond 99."""
    lines = hr_lines(FORMATS["exponents"], n_wann=2, n_r=1)
    lines[FIRST + 1] = lines[FIRST + 1][:25] + "    1.23456789E-31    9.87654321E+29"
    found = read(tmp_path, text(lines))
    assert found.reader == "fixed-columns"
    assert found.h_r[0, 1, 0] == complex(1.23456789e-31, 9.87654321e29)
    lines[FIRST + 1] = lines[FIRST + 1][:25] + "    1.23456789-131    9.87654321E+29"
    found = read(tmp_path, text(lines))
    assert found.h_r[0, 1, 0] == complex(1.23456789e-131, 9.87654321e29)


def test_numbers_that_need_more_than_53_bits(tmp_path: Path) -> None:
    lines = hr_lines(FORMATS["wide numbers"], n_wann=2, n_r=1)
    lines[FIRST] = lines[FIRST][:25] + "     9.007199254740993    99.123456789012345"
    found = read(tmp_path, text(lines))
    assert found.reader == "fixed-columns"
    assert found.h_r[0, 0, 0] == complex(float("9.007199254740993"), float("99.123456789012345"))


def test_wide_numbers_pushed_out_of_their_columns_are_no_damage(tmp_path: Path) -> None:
    """C and Python widen a column that is too narrow, where Fortran prints asterisks."""
    lines = hr_lines("%5d%5d%5d%5d%5d %9.6f %9.6f", n_wann=6, n_r=5, scale=1.0)
    lines[FIRST + 40] = lines[FIRST + 40][:25] + " -123.456789 -0.500000"
    assert read(tmp_path, text(lines)).h_r.tobytes() == slow_twin(lines).tobytes()


def test_last_line_without_line_end(tmp_path: Path) -> None:
    """Accepted where it can be seen to be whole, refused where its last digits may be missing."""
    for layout in ("Wannier90", "exponents", "single blanks"):
        lines = hr_lines(FORMATS[layout])
        content = text(lines)[:-1]
        for fast in (True, False):
            assert read(tmp_path, content, fast=fast).h_r.tobytes() == slow_twin(lines).tobytes()
        for fast in (True, False):
            with pytest.raises(InputError, match="perhaps cut"):
                read(tmp_path, content[:-1], fast=fast)


@pytest.mark.parametrize("last", ["0.2", "0.25", "0", "1e-05"])
def test_free_decimals_do_not_vouch_for_a_last_line(tmp_path: Path, last: str) -> None:
    content = f"toy\n1\n3\n1 1 1\n0 0 0 1 1 0.5 0.0\n1 0 0 1 1 0.5 0.0\n-1 0 0 1 1 0.5 {last}"
    with pytest.raises(InputError, match="perhaps cut"):
        read(tmp_path, content.encode())
    assert read(tmp_path, content.encode() + b"\n").h_r[2, 0, 0] == complex(0.5, float(last))


def test_a_very_long_line_is_refused_and_not_remembered(tmp_path: Path) -> None:
    content = b"x\n1\n1\n1\n0 0 0 1 1 0.5 " + b" " * 5000 + b"0.0\n"
    with pytest.raises(InputError, match="line 5: found a line of 5017 characters, expected 7"):
        read(tmp_path, content)


def test_repeated_r_blocks_are_kept(tmp_path: Path) -> None:
    lines = hr_lines(n_r=2)
    block = lines[FIRST : FIRST + N_WANN**2]
    found = read(tmp_path, text([*lines[:FIRST], *block, *block]))
    assert found.r_cells[0].tolist() == found.r_cells[1].tolist()
    assert (found.h_r[0] == found.h_r[1]).all()


def test_one_wannier_function_and_one_r(tmp_path: Path) -> None:
    content = b"toy\n1\n1\n1\n0 0 0 1 1 -0.5 0\n"
    assert read(tmp_path, content).h_r.tolist() == [[[-0.5 + 0j]]]
