"""Centres on a wrong branch in a real run without guiding centres, and what mending them gives."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from topovet.arrays import FloatArray
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.records import HamiltonianFile, WsShifts
from topovet.intake.shifts.centre_branches import (
    centre_offsets,
    centres_on_other_sites,
    suspicious_centres,
)
from topovet.intake.shifts.centres import read_centres
from topovet.intake.shifts.ws_shifts import apply_shifts, rebuild_shifts
from topovet.intake.shifts.wsvec import read_wsvec
from topovet.intake.wannier_input.win import read_win
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import build_model

CASES = Path(__file__).parents[2] / "fixtures" / "cases"
NAMES = sorted(path.parent.name for path in CASES.glob("*/*_centres.xyz"))

pytestmark = pytest.mark.real_data


def load(name: str) -> tuple[FloatArray, FloatArray, FloatArray, tuple[int, int, int]]:
    """Printed centres, declared sites, cell and mesh."""
    win = read_win(CASES / name / f"{name}.win")
    assert win.cell is not None
    assert win.mp_grid is not None
    assert win.num_wann is not None
    centres = read_centres(CASES / name / f"{name}_centres.xyz", win.num_wann).centres_cart
    sites = np.array([orbital.position_frac for orbital in win.orbitals])
    return centres, sites, win.cell, win.mp_grid


@pytest.mark.parametrize("name", [name for name in NAMES if name != "Bi2Se3_centres_off"])
def test_sound_runs_have_no_suspects(name: str) -> None:
    centres, sites, cell, mesh = load(name)
    offsets = centre_offsets(centres, sites, cell, mesh)
    assert offsets.max() < 0.25
    assert not suspicious_centres(offsets, sites, cell).any()


def test_centres_a_supercell_away_are_harmless() -> None:
    """Six centres of Bi2Se3_mlwf are printed 39 angstrom from their sites."""
    centres, sites, cell, mesh = load("Bi2Se3_mlwf")
    far = np.linalg.norm(centres - sites @ cell, axis=1) > 30
    assert np.flatnonzero(far).tolist() == [24, 25, 26, 27, 28, 29]
    assert centre_offsets(centres, sites, cell, mesh)[far].max() < 0.1


def test_centres_on_a_wrong_branch_are_found() -> None:
    centres, sites, cell, mesh = load("Bi2Se3_centres_off")
    suspects = suspicious_centres(centre_offsets(centres, sites, cell, mesh), sites, cell)
    assert np.flatnonzero(suspects).tolist() == [24, 25, 26, 27, 28, 29]


def test_a_wrong_branch_is_no_other_site() -> None:
    centres, sites, cell, mesh = load("Bi2Se3_centres_off")
    suspects = suspicious_centres(centre_offsets(centres, sites, cell, mesh), sites, cell)
    assert not centres_on_other_sites(centres, sites, cell, mesh, suspects).any()


def test_centres_on_their_sites_give_bands_as_good_as_those_of_the_sound_run() -> None:
    """Against first-principles energies off the mesh, over the 18 occupied bands."""
    sound_rms, sound_max = errors("Bi2Se3", None)
    file_rms, file_max = errors("Bi2Se3_centres_off", None)
    _, sites, cell, _ = load("Bi2Se3_centres_off")
    mended_rms, mended_max = errors("Bi2Se3_centres_off", sites @ cell)
    assert file_max > 0.5
    assert file_rms > 10 * sound_rms
    assert mended_rms < sound_rms
    assert mended_max < sound_max


def errors(name: str, centres: FloatArray | None) -> tuple[float, float]:
    """Root mean square and largest error, eV; with the wsvec file where centres are None."""
    folder = CASES / name
    reference = json.loads((folder / "reference.json").read_text())
    points = reference["dft_energies_off_the_wannier_mesh_eV"]
    n_occ = reference["n_electrons_in_wannier_manifold"]
    hamiltonian = read_hr(folder / f"{name}_hr.dat.gz")
    shifts = (
        read_wsvec(folder / f"{name}_wsvec.dat.gz", hamiltonian)
        if centres is None
        else rebuilt(hamiltonian, name, centres)
    )
    model = build_model(*apply_shifts(hamiltonian, shifts), spinful=True)
    bands = np.linalg.eigvalsh(build_bloch_sum(model).at(np.array([p["k"] for p in points])))
    difference = bands[:, :n_occ] - np.array([p["E"][:n_occ] for p in points])
    return float(np.sqrt((difference**2).mean())), float(np.abs(difference).max())


def rebuilt(hamiltonian: HamiltonianFile, name: str, centres: FloatArray) -> WsShifts:
    _, _, cell, mesh = load(name)
    return rebuild_shifts(hamiltonian.r_cells, centres @ np.linalg.inv(cell), mesh, cell)
