"""Reading `_tb.dat`: cell, Hamiltonian and centres."""

from __future__ import annotations

import gzip
from pathlib import Path

import numpy as np
import pytest
from hamiltonian_text import tb_lines, text

from topovet.intake.hamiltonian import pair_columns
from topovet.intake.hamiltonian.tb import read_tb
from topovet.intake.records import HamiltonianFile

N_WANN, N_R = 3, 3
FIRST_BLOCK = 7


def read(tmp_path: Path, content: bytes, *, fast: bool = True) -> HamiltonianFile:
    path = tmp_path / "x_tb.dat"
    path.write_bytes(content)
    return read_tb(path, fast=fast)


def slow_twin(lines: list[str], first: int, n_numbers: int) -> np.ndarray:
    """The numbers of one section, [r, m, n, number], by split and float."""
    found = np.zeros((N_R, N_WANN, N_WANN, n_numbers))
    for r in range(N_R):
        start = first + r * (N_WANN**2 + 2) + 2
        for line in lines[start : start + N_WANN**2]:
            m, n, *words = line.split()
            found[r, int(m) - 1, int(n) - 1] = [float(word) for word in words]
    return found


@pytest.mark.parametrize("number", ["%15.8E", "%14.7e", "%12.6f", "%.5e", "%.5f"])
@pytest.mark.parametrize("packed", [False, True])
@pytest.mark.parametrize("fast", [True, False])
def test_every_number_is_read_bit_for_bit(
    tmp_path: Path, number: str, packed: bool, fast: bool
) -> None:
    lines = tb_lines(number)
    content = gzip.compress(text(lines)) if packed else text(lines)
    found = read(tmp_path, content, fast=fast)
    numbers = slow_twin(lines, FIRST_BLOCK, 2)
    assert found.h_r.tobytes() == numbers.view(np.complex128)[..., 0].tobytes()
    positions = slow_twin(lines, FIRST_BLOCK + N_R * (N_WANN**2 + 2), 6)
    assert found.centres_cart is not None
    assert (found.centres_cart == positions[1, range(N_WANN), range(N_WANN), ::2]).all()
    in_columns = fast and not number.startswith("%.")
    assert found.reader == ("fixed-columns" if in_columns else "tolerant")


def test_the_record_says_what_the_file_says(tmp_path: Path) -> None:
    found = read(tmp_path, text(tb_lines()))
    assert found.header == "made for a test"
    assert found.r_cells.tolist() == [[-1, 0, 0], [0, 0, 0], [1, 0, 0]]
    assert found.degeneracies.tolist() == [1, 1, 1]
    assert found.cell is not None
    assert found.cell.tolist() == [[2.0, -1.0, 9.5], [0.0, 2.5, 9.5], [-2.0, -1.0, 9.5]]
    assert found.decimals is None
    assert not found.h_r.flags.writeable


def test_decimals_without_exponent(tmp_path: Path) -> None:
    assert read(tmp_path, text(tb_lines("%12.6f"))).decimals == 6
    assert read(tmp_path, text(tb_lines("%12.6f")), fast=False).decimals == 6


def test_three_digit_exponents_as_fortran_writes_them(tmp_path: Path) -> None:
    lines = tb_lines()
    lines[FIRST_BLOCK + 16] = "    1    2    1.23456789-123  2.00000000E+00"
    found = read(tmp_path, text(lines))
    assert found.reader == "tolerant"
    assert found.h_r[1, 0, 1] == complex(1.23456789e-123, 2.0)


def test_without_the_home_cell_there_are_no_centres(tmp_path: Path) -> None:
    lines = [line.replace("    0    0    0", "    5    0    0") for line in tb_lines()]
    assert read(tmp_path, text(lines)).centres_cart is None


@pytest.mark.parametrize("step", [3, 6, 1000])
def test_steps_of_any_size_give_the_same(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, step: int
) -> None:
    whole = read(tmp_path, text(tb_lines()))
    monkeypatch.setattr(pair_columns, "LINES_PER_STEP", step)
    found = read(tmp_path, text(tb_lines()))
    assert found.reader == "fixed-columns"
    assert found.h_r.tobytes() == whole.h_r.tobytes()
