"""Parities and energies against the first-principles runs the real cases come from.

`dft_parity.json` holds <psi|P|psi> of the plane-wave wave functions themselves, which never went
through Wannier90; `_band.dat` is Wannier90's own interpolation, `.eig` the energies of the run on
its coarse mesh. None of them is an input of the parity witness.
"""

from __future__ import annotations

import functools
import gzip

import numpy as np
import pytest

from real_cases import CASES, CENTROSYMMETRIC, reference, vetted
from topovet.arrays import FloatArray
from topovet.intake.discovery import find_case
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.shifts.wsvec import read_wsvec
from topovet.intake.wannier_input.win import read_win
from topovet.model.assemble import assemble
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import eigenvalues

pytestmark = pytest.mark.real_data


@functools.cache
def bloch_of(case: str) -> BlochSum:
    """H(k) as Wannier90 interpolates it: the file's own shifts, right or wrong."""
    files = find_case(CASES / case)
    assert files.hr is not None
    assert files.win is not None
    assert files.wsvec is not None
    win = read_win(files.win)
    hamiltonian = read_hr(files.hr)
    shifts = read_wsvec(files.wsvec, hamiltonian, mp_grid=win.mp_grid)
    in_plane = win.mp_grid is not None and win.mp_grid[2] == 1
    return assemble(hamiltonian, shifts, (True, True, not in_plane), spinful=True).bloch


def text_table(case: str, file: str) -> FloatArray:
    with gzip.open(CASES / case / f"{file}.gz", "rt") as stream:
        return np.loadtxt(stream)


def test_all_centrosymmetric_cases_are_covered() -> None:
    assert len(CENTROSYMMETRIC) == 12


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_parities_are_those_of_the_wave_functions(case: str) -> None:
    """n+ and n- at every TRIM, up to one sign for all of them; delta products exactly."""
    expected = {
        tuple(2 * k % 2 for k in trim["k"]): trim
        for trim in reference(case, "dft_parity.json")["trims"]
    }
    found = {tuple(2 * k % 2 for k in trim.k): trim for trim in vetted(case).witnesses.parity.trim}
    assert found.keys() == expected.keys()
    centre = vetted(case).inversion.centre
    assert centre is not None
    np.testing.assert_allclose(np.array(centre) % 1.0, 0.0, atol=1e-6)  # as in the reference
    odd = {
        k: 2 * trim["parities_wannier_occupied_kramers_pairs"].count(-1)
        for k, trim in expected.items()
    }
    n_occ = reference(case, "dft_parity.json")["n_occupied_wannier"]
    same = all(found[k].n_minus == odd[k] for k in odd)
    opposite = all(found[k].n_plus == odd[k] for k in odd)
    assert same or opposite
    assert all(t.n_plus + t.n_minus == n_occ for t in found.values())
    sign = 1 if same else (-1) ** (n_occ // 2)
    for k, trim in expected.items():
        assert found[k].delta == sign * trim["delta_wannier_occupied"]


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_indices_are_those_of_the_wave_functions(case: str) -> None:
    verdict = vetted(case)
    expected = tuple(reference(case, "dft_parity.json")["indices_wannier_occupied"])
    assert verdict.witnesses.parity.status == "ok"
    assert verdict.witnesses.parity.z2 == expected
    assert verdict.invariants.z2 == expected


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_trim_gaps_are_those_of_the_run(case: str) -> None:
    """TRIM are points of the coarse mesh: Wannier functions reproduce the gap there.

    Empty bands above the frozen window are disentangled and rough, so only gaps whose upper edge
    lies inside it are compared.
    """
    windows = reference(case, "reference.json")["windows"]
    energies = {
        tuple(point["trim"]): point["E"]
        for point in reference(case, "reference.json")["dft_energies_at_trims_all_bands_eV"]
    }
    parity = reference(case, "dft_parity.json")
    n_all = parity["n_occupied_all"]
    compared = 0
    for trim in vetted(case).witnesses.parity.trim:
        levels = energies[tuple(round(2 * k) for k in trim.k)]
        if levels[n_all] > windows["dis_froz_max_eV"]:
            continue
        assert trim.gap_eV == pytest.approx(levels[n_all] - levels[n_all - 1], abs=2e-4)
        compared += 1
    assert compared >= 1


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_bands_are_those_of_wannier90(case: str) -> None:
    """Every band on the whole path within 1 meV, read with the same shifts as Wannier90 did."""
    k_frac = np.loadtxt(CASES / case / f"{case}_band.kpt", skiprows=1)[:, :3]
    theirs = text_table(case, f"{case}_band.dat")[:, 1].reshape(-1, len(k_frac)).T
    ours = eigenvalues(bloch_of(case), k_frac)
    assert ours.shape == theirs.shape
    assert np.abs(ours - theirs).max() < 1e-3


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_mesh_energies_are_within_the_reported_error(case: str) -> None:
    """Occupied bands on the coarse mesh: within the verdict's own figure, and that is small."""
    win = read_win(CASES / case / f"{case}.win")
    assert win.kpoints_frac is not None
    table = text_table(case, f"{case}.eig")
    theirs = table[:, 2].reshape(len(win.kpoints_frac), -1)
    parity = reference(case, "dft_parity.json")
    filling = parity["n_occupied_wannier"]
    ours = eigenvalues(bloch_of(case), win.kpoints_frac)[:, :filling]
    # .eig leaves out the excluded bands; what is left below the manifold is counted from the top
    first = parity["n_occupied_all"] - len(win.exclude_bands) - filling
    worst_mev = 1000 * np.abs(ours - theirs[:, first : first + filling]).max()
    reported = vetted(case).robustness.errors_meV["interpolation"]
    assert reported is not None
    assert worst_mev <= reported + 1e-6
    assert reported < 0.1
