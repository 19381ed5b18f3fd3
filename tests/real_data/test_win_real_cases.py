"""`.win` files of the real cases, against the other files Wannier90 wrote for them."""

from __future__ import annotations

import gzip
from pathlib import Path

import numpy as np
import pytest

from topovet.arrays import ComplexArray, FloatArray
from topovet.intake.records import WinFile
from topovet.intake.wannier_input.win import read_win
from topovet.model.basis import OrbitalBasis
from topovet.model.build_basis import build_basis
from topovet.model.crystal import Crystal
from topovet.model.real_harmonics import harmonic_rotation

CASES = Path(__file__).parents[2] / "fixtures" / "cases"
NAMES = sorted(path.parent.name for path in CASES.glob("*/*.win"))
SIGMA = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])

pytestmark = pytest.mark.real_data


def load(name: str) -> tuple[WinFile, OrbitalBasis]:
    win = read_win(CASES / name / f"{name}.win")
    assert win.cell is not None
    return win, build_basis(win.orbitals, Crystal(win.cell, win.symbols, win.positions_frac))


def printed_centres(name: str) -> FloatArray:
    lines = (CASES / name / f"{name}_centres.xyz").read_text().splitlines()
    return np.array([line.split()[1:4] for line in lines if line.startswith("X ")], dtype=float)


def onsite_block(name: str) -> ComplexArray:
    """H(R = 0) as printed, (n_wann, n_wann) eV."""
    with gzip.open(CASES / name / f"{name}_hr.dat.gz", "rt") as stream:
        lines = stream.read().splitlines()
    n_wann, n_r = int(lines[1]), int(lines[2])
    table = np.loadtxt(lines[3 + -(-n_r // 15) :])
    home = table[(table[:, :3] == 0).all(axis=1)]
    h = np.zeros((n_wann, n_wann), dtype=np.complex128)
    rows, columns = home[:, 3].astype(int) - 1, home[:, 4].astype(int) - 1
    h[rows, columns] = home[:, 5] + 1j * home[:, 6]
    return h


def spin_orbit_p() -> ComplexArray:
    """L.S on pz up, pz down, px up, … (6, 6); L from an infinitesimal turn, exp(-i phi L)."""
    step, total = 1e-5, np.zeros((6, 6), dtype=np.complex128)
    for axis in range(3):
        generator = np.zeros((3, 3))
        generator[(axis + 2) % 3, (axis + 1) % 3] = step
        generator -= generator.T
        plus, minus = (harmonic_rotation(np.eye(3) + sign * generator) for sign in (1, -1))
        momentum = 1j * (plus - minus)[1:4, 1:4] / (2 * step)
        total += np.kron(momentum, SIGMA[axis] / 2)
    return total


def misfit_ev(block: ComplexArray) -> float:
    """Largest deviation of a p block from a + b L.S."""
    shapes = np.stack([np.eye(6).ravel(), spin_orbit_p().ravel()], axis=1)
    fitted = shapes @ np.linalg.lstsq(shapes, block.ravel(), rcond=None)[0]
    return float(np.abs(block.ravel() - fitted).max())


def test_all_cases_are_there() -> None:
    assert len(NAMES) == 15


@pytest.mark.parametrize("name", NAMES)
def test_declared_functions(name: str) -> None:
    win, basis = load(name)
    assert win.undeclared_reason is None
    assert win.spinors
    assert basis.n_orb == win.num_wann
    assert [o.spin for o in win.orbitals] == [1, -1] * (basis.n_orb // 2)
    spatial = [label.rsplit(" ", 1)[0] for label in basis.labels]
    assert spatial[0::2] == spatial[1::2]
    by_site: dict[str, list[str]] = {}
    for label in spatial[0::2]:
        site, orbital = label.split()
        by_site.setdefault(site, []).append(orbital)
    assert len(by_site) == len(win.symbols)
    for orbitals in by_site.values():
        assert orbitals in (["pz", "px", "py"], ["s", "pz", "px", "py"])
    for orbital in win.orbitals:
        assert orbital.atom is not None
        assert orbital.position_frac == tuple(win.positions_frac[orbital.atom])


@pytest.mark.parametrize("name", [name for name in NAMES if name != "Bi2Se3_centres_off"])
def test_printed_centres_lie_at_the_declared_sites(name: str) -> None:
    """Modulo the supercell of the mesh: a quarter of an angstrom, far less than a bond."""
    win, basis = load(name)
    assert win.cell is not None
    assert win.mp_grid is not None
    apart = printed_centres(name) @ np.linalg.inv(win.cell) - basis.positions_frac
    apart -= np.round(apart / win.mp_grid) * win.mp_grid
    distance = np.linalg.norm(apart @ win.cell, axis=1)
    assert distance.max() < 0.25
    # every other site is further away than the declared one
    sites = win.positions_frac[None, :, :] - (basis.positions_frac + apart)[:, None, :]
    sites -= np.round(sites)
    nearest = np.linalg.norm(sites @ win.cell, axis=2).argmin(axis=1)
    assert nearest.tolist() == [o.atom for o in win.orbitals]


@pytest.mark.parametrize("name", NAMES)
def test_atoms_are_those_that_wannier90_printed(name: str) -> None:
    win, _ = load(name)
    assert win.cell is not None
    lines = (CASES / name / f"{name}_centres.xyz").read_text().splitlines()[2:]
    atoms = [line.split() for line in lines if not line.startswith("X ")]
    assert [atom[0] for atom in atoms] == list(win.symbols)
    printed = np.array([atom[1:4] for atom in atoms], dtype=float)
    apart = printed @ np.linalg.inv(win.cell) - win.positions_frac
    assert np.abs((apart - np.round(apart)) @ win.cell).max() < 1e-6


@pytest.mark.parametrize("name", NAMES)
def test_mesh_is_the_product_of_mp_grid(name: str) -> None:
    win, _ = load(name)
    assert win.mp_grid is not None
    assert win.kpoints_frac is not None
    index = np.round(win.kpoints_frac * win.mp_grid).astype(int)
    assert win.kpoints_frac * win.mp_grid == pytest.approx(index, abs=1e-9)
    assert len(np.unique(index, axis=0)) == np.prod(win.mp_grid)


@pytest.mark.parametrize("name", ["PbTe", "PbTe_a656", "CdTe", "Si"])
def test_onsite_spin_orbit_coupling_confirms_order_and_spin(name: str) -> None:
    """On a cubic site a p shell has H = a + b L.S in the declared order, and in no other one."""
    _, basis = load(name)
    h = onsite_block(name)
    starts = [n for n, label in enumerate(basis.labels) if label.endswith("pz up")]
    assert starts
    worst, nearest_wrong = 0.0, np.inf
    for start in starts:
        block = h[start : start + 6, start : start + 6]
        worst = max(worst, misfit_ev(block))
        xyz_order = block[np.ix_([4, 5, 0, 1, 2, 3], [4, 5, 0, 1, 2, 3])]
        spin_blocks = block[np.ix_([0, 2, 4, 1, 3, 5], [0, 2, 4, 1, 3, 5])]
        down_first = block[np.ix_([1, 0, 3, 2, 5, 4], [1, 0, 3, 2, 5, 4])]
        px_py_swapped = block[np.ix_([0, 1, 4, 5, 2, 3], [0, 1, 4, 5, 2, 3])]
        others = (xyz_order, spin_blocks, down_first, px_py_swapped)
        wrong = min(misfit_ev(other) for other in others)
        nearest_wrong = min(nearest_wrong, wrong)
    assert worst < 1e-4
    assert nearest_wrong > 1e-2
