"""The other companions of the real cases: energies on the mesh, structures, settings, audit."""

from __future__ import annotations

import hashlib
from pathlib import Path

import numpy as np
import pytest

from topovet.intake.audit import audit_hamiltonian
from topovet.intake.bands import read_eig
from topovet.intake.case_toml import read_settings
from topovet.intake.discovery import find_case, sha256_of
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.shifts.ws_shifts import apply_shifts
from topovet.intake.structure import read_structure
from topovet.intake.wannier_input.win import read_win
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import build_model

CASES = Path(__file__).parents[2] / "fixtures" / "cases"
NAMES = sorted(path.parent.name for path in CASES.glob("*/case.toml"))

pytestmark = pytest.mark.real_data


@pytest.mark.parametrize("name", NAMES)
def test_files_and_settings(name: str) -> None:
    case = find_case(CASES / name)
    assert case.seedname == name
    assert None not in (case.hr, case.win, case.wsvec, case.centres, case.eig, case.structure)
    assert (case.tb is not None) is (name == "Bi2Se3")
    assert case.settings is not None
    settings = read_settings(case.settings)
    assert settings.name is not None
    assert settings.dimension == (2 if name.endswith("bilayer") else 3)
    assert case.hr is not None
    data = Path(case.hr).read_bytes()
    assert sha256_of(case.hr) == (hashlib.sha256(data).hexdigest(), len(data))


@pytest.mark.parametrize("name", NAMES)
def test_the_structure_is_that_of_the_win_file(name: str) -> None:
    case = find_case(CASES / name)
    assert case.structure is not None
    assert case.win is not None
    structure, win = read_structure(case.structure), read_win(case.win)
    np.testing.assert_allclose(structure.cell, win.cell, atol=1e-6)
    np.testing.assert_allclose(structure.positions_frac, win.positions_frac, atol=1e-8)
    assert structure.symbols == win.symbols


@pytest.mark.parametrize("name", NAMES)
def test_occupied_first_principles_energies_come_back_on_the_mesh(name: str) -> None:
    """`.eig` against H(k) at the k-points of the `.win`: the frozen window is exact there."""
    case = find_case(CASES / name)
    assert case.hr is not None
    assert case.win is not None
    assert case.eig is not None
    assert case.settings is not None
    win, n_occ = read_win(case.win), read_settings(case.settings).filling
    assert win.mp_grid is not None
    assert win.kpoints_frac is not None
    eig = read_eig(case.eig, n_k=int(np.prod(win.mp_grid)), n_bands=win.num_bands)
    model = build_model(*apply_shifts(read_hr(case.hr), None), spinful=win.spinors)
    bands = np.linalg.eigvalsh(build_bloch_sum(model).at(win.kpoints_frac))
    assert np.abs(bands[:, :n_occ] - eig.energies_ev[:, :n_occ]).max() < 1e-3


@pytest.mark.parametrize("name", NAMES)
def test_a_sound_file_passes_its_audit(name: str) -> None:
    case = find_case(CASES / name)
    assert case.hr is not None
    assert case.win is not None
    win = read_win(case.win)
    found = audit_hamiltonian(read_hr(case.hr), mp_grid=win.mp_grid, shift_source="", shift_note="")
    assert found.degeneracy_sum == pytest.approx(found.mesh_points, abs=1e-9)
    assert found.duplicate_r == found.missing_partner_r == ()
    # Each element is rounded to 1e-6 eV: the norm of the difference is at most n_wann * 1e-6.
    assert found.hermiticity_mev <= 1e-3 * found.n_wann
    assert found.rounding_mev < 1.0
