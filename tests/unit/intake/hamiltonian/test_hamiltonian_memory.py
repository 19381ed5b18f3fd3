"""Readers stream: memory is the result and a bounded buffer, however large the file."""

from __future__ import annotations

import gzip
import tracemalloc
from collections.abc import Callable
from pathlib import Path

import pytest
from hamiltonian_text import FORMATS, hr_lines, tb_lines, text

from topovet.errors import InputError
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.hamiltonian.tb import read_tb
from topovet.intake.records import HamiltonianFile

BUFFER_BYTES = 8_000_000
"""Stated bound of what a reader needs besides the result."""


def peak_beyond_result(read: Callable[[], HamiltonianFile]) -> int:
    tracemalloc.start()
    found = read()
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    return peak - found.h_r.nbytes - found.r_cells.nbytes - found.degeneracies.nbytes


def big_hr(number: str, n_wann: int, n_r: int) -> bytes:
    """One block of random numbers under n_r different R."""
    lines = hr_lines(number, n_wann=n_wann, n_r=1)
    head = f"big\n{n_wann}\n{n_r}\n" + " 1" * n_r + "\n"
    block = text(lines[4:])
    first_r = lines[4].split()[0].rjust(5) + lines[4].split()[1].rjust(5)
    r_texts = [f"{i % 90:5d}{i // 90:5d}" for i in range(n_r)]
    if not lines[4].startswith(first_r):
        first_r = " ".join(lines[4].split()[:2])
        r_texts = [f"{i % 90} {i // 90}" for i in range(n_r)]
    blocks = [
        b"".join(
            line.replace(first_r.encode(), r_text.encode(), 1)
            for line in block.splitlines(keepends=True)
        )
        for r_text in r_texts
    ]
    return head.encode() + b"".join(blocks)


@pytest.mark.parametrize("packed", [False, True])
@pytest.mark.parametrize(("n_wann", "n_r"), [(30, 500), (2, 100_000), (400, 3)])
def test_fixed_columns(tmp_path: Path, n_wann: int, n_r: int, packed: bool) -> None:
    path = tmp_path / "x_hr.dat"
    content = big_hr(FORMATS["Wannier90"], n_wann, n_r)
    assert len(content) > 2 * BUFFER_BYTES
    path.write_bytes(gzip.compress(content, 1) if packed else content)
    assert read_hr(path).reader == "fixed-columns"
    assert peak_beyond_result(lambda: read_hr(path)) < BUFFER_BYTES


def test_free_layout(tmp_path: Path) -> None:
    """What the thorough reader needs does not grow with the file."""
    path = tmp_path / "x_hr.dat"
    sizes, peaks = [], []
    for n_r in (10, 50):
        content = big_hr(FORMATS["single blanks"], 30, n_r)
        path.write_bytes(content)
        sizes.append(len(content))
        peaks.append(peak_beyond_result(lambda: read_hr(path, fast=False)))
    assert peaks[1] - peaks[0] < (sizes[1] - sizes[0]) / 10
    assert peaks[1] < BUFFER_BYTES


def test_positions_are_not_kept(tmp_path: Path) -> None:
    lines = tb_lines(n_wann=60, n_r=10)
    path = tmp_path / "x_tb.dat"
    path.write_bytes(text(lines))
    assert peak_beyond_result(lambda: read_tb(path)) < BUFFER_BYTES


@pytest.mark.parametrize("packed", [False, True])
@pytest.mark.parametrize("counts", [b"30000\n1\n", b"30\n900000000\n", b"999999999\n999999999\n"])
def test_a_hostile_promise_costs_nothing(tmp_path: Path, counts: bytes, packed: bool) -> None:
    content = b"x\n" + counts + b"    1    1    1\n" * 5
    path = tmp_path / "x_hr.dat"
    path.write_bytes(gzip.compress(content) if packed else content)
    tracemalloc.start()
    with pytest.raises(InputError):
        read_hr(path)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 2_000_000
