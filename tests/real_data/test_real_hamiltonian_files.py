"""The first-principles cases: every number of every file, against numpy.loadtxt."""

from __future__ import annotations

import gzip
import random
from pathlib import Path

import numpy as np
import pytest

from topovet.errors import InputError
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.hamiltonian.hr_write import write_hr
from topovet.intake.hamiltonian.tb import read_tb
from topovet.intake.records import HamiltonianFile

pytestmark = pytest.mark.real_data

CASES = Path(__file__).parents[2] / "fixtures" / "cases"
HR_FILES = sorted(CASES.glob("*/*_hr.dat.gz"))
BI2SE3 = CASES / "Bi2Se3"


def test_the_cases_are_there() -> None:
    assert len(HR_FILES) >= 15


def loaded(path: Path, found: HamiltonianFile) -> tuple[np.ndarray, np.ndarray]:
    """R and H[r, m, n] by numpy.loadtxt."""
    n_r, n_wann = len(found.degeneracies), found.n_wann
    rows = np.loadtxt(path, skiprows=3 + -(-n_r // 15))
    elements = rows[:, 5:].copy().view(np.complex128).reshape(n_r, n_wann, n_wann)
    return rows[:: n_wann**2, :3].astype(int), elements.transpose(0, 2, 1)


@pytest.mark.parametrize("path", HR_FILES, ids=lambda path: path.parent.name)
def test_hr_is_read_bit_for_bit(path: Path) -> None:
    found = read_hr(path)
    r_cells, h_r = loaded(path, found)
    assert found.reader == "fixed-columns"
    assert found.decimals == 6
    assert (found.r_cells == r_cells).all()
    assert found.h_r.tobytes() == h_r.tobytes()


@pytest.mark.parametrize("path", HR_FILES[::5], ids=lambda path: path.parent.name)
def test_the_thorough_reader_agrees(path: Path) -> None:
    fast, thorough = read_hr(path), read_hr(path, fast=False)
    assert thorough.reader == "tolerant"
    assert thorough.decimals == fast.decimals
    assert thorough.h_r.tobytes() == fast.h_r.tobytes()
    assert (thorough.r_cells == fast.r_cells).all()


@pytest.mark.parametrize("path", HR_FILES[::5], ids=lambda path: path.parent.name)
def test_written_again_only_the_header_differs(tmp_path: Path, path: Path) -> None:
    found = read_hr(path)
    copy = tmp_path / "x_hr.dat"
    write_hr(copy, found.r_cells, found.h_r, degeneracies=found.degeneracies)
    assert copy.read_bytes().split(b"\n")[1:] == gzip.decompress(path.read_bytes()).split(b"\n")[1:]


def test_tb_is_read_bit_for_bit() -> None:
    path = BI2SE3 / "Bi2Se3_tb.dat.gz"
    found = read_tb(path)
    assert found.reader == "fixed-columns"
    lines = gzip.decompress(path.read_bytes()).decode().split("\n")
    numbers = [line.split() for line in lines if len(line.split()) == 4 and "." in line]
    expected = np.array([[float(word) for word in words[2:]] for words in numbers])
    elements = expected.view(np.complex128).reshape(79, 30, 30)
    assert found.h_r.tobytes() == elements.transpose(0, 2, 1).tobytes()
    thorough = read_tb(path, fast=False)
    assert thorough.h_r.tobytes() == found.h_r.tobytes()
    assert thorough.centres_cart is not None
    assert found.centres_cart is not None
    assert thorough.centres_cart.tobytes() == found.centres_cart.tobytes()


def test_tb_and_hr_are_the_same_hamiltonian() -> None:
    """hr.dat rounds to six decimals what tb.dat gives with eight digits."""
    tb, hr = read_tb(BI2SE3 / "Bi2Se3_tb.dat.gz"), read_hr(BI2SE3 / "Bi2Se3_hr.dat.gz")
    difference = (tb.h_r - hr.h_r).view(np.float64)
    assert np.abs(difference).max() < 0.5e-6 + 1e-7
    assert (tb.r_cells == hr.r_cells).all()
    assert (tb.degeneracies == hr.degeneracies).all()


def test_tb_centres_are_those_of_wannier90_up_to_its_branches() -> None:
    """All but those of one selenium site, for which tb.dat took another branch of the logarithm.

    Wannier90 follows guiding centres for `_centres.xyz` but not for `_tb.dat`: a property of the
    file, which a reader must hand on and its user must know.
    """
    tb = read_tb(BI2SE3 / "Bi2Se3_tb.dat.gz")
    lines = (BI2SE3 / "Bi2Se3_centres.xyz").read_text().split("\n")
    centres = np.array([line.split()[1:] for line in lines if line.startswith("X")], dtype=float)
    assert tb.centres_cart is not None
    distance = np.linalg.norm(tb.centres_cart - centres, axis=1)
    # tb.dat has eight digits (1e-6 angstrom at 14 angstrom), the xyz file eight decimals.
    assert distance[:24].max() < 1.1e-6
    assert np.ptp(distance[24:]) < 1.1e-6
    assert distance[24:].min() > 36


def test_a_real_file_cut_or_short_of_a_byte_is_refused(tmp_path: Path) -> None:
    """Anywhere in the file, whatever the byte was."""
    content = gzip.decompress((CASES / "Bi111_bilayer" / "Bi111_bilayer_hr.dat.gz").read_bytes())
    first = content.index(b"    1    1 ")
    draw = random.Random(5)
    path = tmp_path / "x_hr.dat"
    for _ in range(12):
        at = draw.randrange(first, len(content) - 2)
        path.write_bytes(content[:at])
        with pytest.raises(InputError, match="matrix elements"):
            read_hr(path)
        path.write_bytes(content[:at] + content[at + 1 :])
        with pytest.raises(InputError, match=", line "):
            read_hr(path)
