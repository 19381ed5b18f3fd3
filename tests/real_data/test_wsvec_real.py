"""Wigner-Seitz shifts of the real cases: Wannier90's own file, and its own interpolated bands."""

from __future__ import annotations

from functools import lru_cache
from pathlib import Path

import numpy as np
import pytest

from topovet.arrays import FloatArray
from topovet.intake.bands import read_bands
from topovet.intake.discovery import find_case
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.records import CaseFiles, HamiltonianFile, WinFile, WsShifts
from topovet.intake.shifts.centres import read_centres
from topovet.intake.shifts.ws_shifts import apply_shifts, rebuild_shifts
from topovet.intake.shifts.wsvec import read_wsvec
from topovet.intake.wannier_input.win import read_win
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import build_model

CASES = Path(__file__).parents[2] / "fixtures" / "cases"
NAMES = sorted(path.parent.name for path in CASES.glob("*/*_wsvec.dat.gz"))

pytestmark = pytest.mark.real_data


@lru_cache(maxsize=1)
def load(name: str) -> tuple[CaseFiles, HamiltonianFile, WinFile, WsShifts]:
    case = find_case(CASES / name)
    assert case.hr is not None
    assert case.win is not None
    assert case.wsvec is not None
    hamiltonian, win = read_hr(case.hr), read_win(case.win)
    return case, hamiltonian, win, read_wsvec(case.wsvec, hamiltonian, mp_grid=win.mp_grid)


def test_there_are_cases() -> None:
    assert len(NAMES) >= 15


@pytest.mark.parametrize("name", NAMES)
def test_rebuilt_shifts_are_those_of_the_file(name: str) -> None:
    """Element by element, order included; for centres on a wrong branch just as for sound ones."""
    case, hamiltonian, win, shifts = load(name)
    assert case.centres is not None
    assert win.cell is not None
    assert win.mp_grid is not None
    centres = read_centres(case.centres, hamiltonian.n_wann).centres_cart
    rebuilt = rebuild_shifts(
        hamiltonian.r_cells,
        centres @ np.linalg.inv(win.cell),
        win.mp_grid,
        win.cell,
        tol=win.ws_distance_tol,
        search_size=win.ws_search_size,
    )
    np.testing.assert_array_equal(rebuilt.counts, shifts.counts)
    np.testing.assert_array_equal(rebuilt.shifts, shifts.shifts)


@pytest.mark.parametrize("name", NAMES)
def test_bands_are_wannier90s_own(name: str) -> None:
    """`_band.dat` within 0.1 meV (the issue asks for 1); hr.dat has six decimals."""
    case, hamiltonian, _, shifts = load(name)
    assert case.band is not None
    assert case.band_kpt is not None
    bands = read_bands(case.band, case.band_kpt, n_wann=hamiltonian.n_wann)
    error = np.abs(energies(hamiltonian, shifts, bands.k_frac) - bands.energies_ev).max()
    assert error < 1e-4


def test_bare_bands_are_not() -> None:
    """The check above can fail: without shifts the bands between mesh points are far off."""
    case, hamiltonian, _, _ = load("PbTe")
    assert case.band is not None
    assert case.band_kpt is not None
    bands = read_bands(case.band, case.band_kpt)
    error = np.abs(energies(hamiltonian, None, bands.k_frac) - bands.energies_ev).max()
    assert error > 5e-3


def energies(
    hamiltonian: HamiltonianFile, shifts: WsShifts | None, k_frac: FloatArray
) -> FloatArray:
    model = build_model(*apply_shifts(hamiltonian, shifts), spinful=True)
    return np.linalg.eigvalsh(build_bloch_sum(model).at(k_frac))
