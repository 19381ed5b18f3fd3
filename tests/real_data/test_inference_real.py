"""Inversion inferred from real Hamiltonians, with what is declared removed or falsified.

`dft_parity.json` holds the parities of the plane-wave states, which saw neither Wannier90 nor any
declaration. Centres come from `_centres.xyz`, the mesh and the cell from the `.win` file; its
projections are not read unless a test says so.
"""

from __future__ import annotations

import functools
import re
from dataclasses import dataclass, replace

import numpy as np
import pytest

from inverted_models import with_noise
from real_cases import CASES, CENTROSYMMETRIC, reference
from topovet.intake.discovery import find_case
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.records import HamiltonianFile, WinFile
from topovet.intake.shifts.centres import read_centres
from topovet.intake.shifts.ws_shifts import rebuild_shifts
from topovet.intake.wannier_input.win import read_win
from topovet.invariants.inferred_parity import compute_inferred_parity
from topovet.invariants.parity import compute_parity
from topovet.invariants.results import ParityWitness
from topovet.model.assemble import LatticeHamiltonian, assemble
from topovet.model.basis import OrbitalBasis
from topovet.model.build_basis import build_basis
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.symmetry.centre_search import search_centres
from topovet.symmetry.declaration_check import compare_declaration
from topovet.symmetry.declaration_results import DeclarationCheck
from topovet.symmetry.inference import InferredInversion, align_sign, infer_inversion
from topovet.symmetry.inversion import build_inversion
from topovet.symmetry.results import InversionOperator
from topovet.symmetry.sites import (
    SiteAssignment,
    assign_sites,
    declared_sites,
    nominal_positions,
    relocate_strays,
)

pytestmark = pytest.mark.real_data

ORIGIN = np.zeros(3)
"""An inversion centre of every centrosymmetric case, as `dft_parity.json` takes it."""


@dataclass(frozen=True, slots=True, eq=False)
class Undeclared:
    """A case read without its projections.

    `bare` has no Wigner-Seitz shifts; `lattice` has those that follow from the inferred sites.
    """

    crystal: Crystal
    sites: SiteAssignment
    bare: LatticeHamiltonian
    lattice: LatticeHamiltonian


@functools.cache
def undeclared(case: str) -> Undeclared:
    win, file, crystal = _files(case)
    folder = find_case(CASES / case)
    assert folder.centres is not None
    centres = read_centres(folder.centres, file.n_wann).centres_cart @ np.linalg.inv(crystal.cell)
    bare = assemble(file, None, crystal.periodic, spinful=True)
    sites = assign_sites(centres, crystal, model=bare.model)
    sites = relocate_strays(sites, crystal, bare.model) or sites
    assert win.mp_grid is not None
    shifts = rebuild_shifts(
        file.r_cells,
        nominal_positions(sites, crystal),
        win.mp_grid,
        crystal.cell,
        tol=win.ws_distance_tol,
        search_size=win.ws_search_size,
    )
    return Undeclared(crystal, sites, bare, assemble(file, shifts, crystal.periodic, spinful=True))


@functools.cache
def _files(case: str) -> tuple[WinFile, HamiltonianFile, Crystal]:
    folder = find_case(CASES / case)
    assert folder.hr is not None
    assert folder.win is not None
    win = read_win(folder.win)
    assert win.cell is not None
    assert win.mp_grid is not None
    a, b, c = (n > 1 for n in win.mp_grid)
    return win, read_hr(folder.hr), Crystal(win.cell, win.symbols, win.positions_frac, (a, b, c))


def declared_basis(case: str) -> OrbitalBasis:
    win, _, crystal = _files(case)
    return build_basis(win.orbitals, crystal)


def infer(case: str, lattice: LatticeHamiltonian | None = None) -> InferredInversion:
    read = undeclared(case)
    model = (lattice or read.lattice).model
    return infer_inversion(model, read.crystal, read.sites, ORIGIN, spinful=True)


def filling(case: str) -> int:
    n_occ: int = reference(case, "dft_parity.json")["n_occupied_wannier"]
    return n_occ


def parities(
    case: str, operator: InversionOperator, lattice: LatticeHamiltonian | None = None
) -> ParityWitness:
    read = undeclared(case)
    bloch = (lattice or read.lattice).bloch
    return compute_parity(bloch, operator, filling(case), read.crystal.periodic, kramers=True)


def odd_states(witness: ParityWitness) -> dict[tuple[int, ...], int]:
    return {tuple(round(2 * c) for c in t.k): t.n_minus for t in witness.trim}


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_sites_are_the_declared_ones(case: str) -> None:
    read, basis = undeclared(case), declared_basis(case)
    declared = declared_sites(basis.positions_frac, read.crystal)
    np.testing.assert_array_equal(read.sites.site_of, declared.site_of)
    np.testing.assert_array_equal(read.sites.homes, declared.homes)
    np.testing.assert_array_equal(read.sites.atoms, declared.atoms)
    # six functions of one run have centres on a wrong branch, 2.7 angstrom from any atom
    strays = tuple(range(24, 30)) if case == "Bi2Se3_centres_off" else ()
    assert read.sites.relocated == strays


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_inferred_inversion_is_the_declared_one(case: str) -> None:
    """Up to the overall sign, from the shifted and from the bare reading of the file."""
    read = undeclared(case)
    declared = build_inversion(declared_basis(case), read.crystal, ORIGIN)
    periodic = np.array(read.crystal.periodic)
    for lattice in (read.lattice, read.bare):
        found = infer(case, lattice)
        assert found.reliability == "good", found.reason
        assert found.null_space == 1
        assert not found.acts_on_spin
        assert found.operator is not None
        matrix = align_sign(found.operator, declared).matrix
        np.testing.assert_allclose(matrix, declared.matrix, atol=1e-5)
        between = found.operator.shifts - declared.shifts
        assert not between[:, periodic].any()
    assert infer(case).rms_residual_mev == pytest.approx(0, abs=0.1)


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_parities_without_declared_projections_are_those_of_the_wave_functions(case: str) -> None:
    read = undeclared(case)
    found = compute_inferred_parity(
        read.lattice.bloch, infer(case), filling(case), read.crystal.periodic, kramers=True
    )
    assert found.status == "ok", found.reason
    expected = {
        tuple(round(2 * c) % 2 for c in trim["k"]): 2
        * trim["parities_wannier_occupied_kramers_pairs"].count(-1)
        for trim in reference(case, "dft_parity.json")["trims"]
    }
    flipped = {k: filling(case) - n for k, n in expected.items()}
    assert odd_states(found) in (expected, flipped)
    declared = parities(case, build_inversion(declared_basis(case), read.crystal, ORIGIN))
    assert found.z2 == declared.z2
    assert found.kappa in (declared.kappa, None if declared.kappa is None else -declared.kappa)


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_noise_of_20_mev_on_every_hopping_changes_no_parity(case: str) -> None:
    """The operator comes from the noisy Hamiltonian; it is applied to the sound one.

    (Noise of this kind adds up to 0.2 to 0.4 eV on each element of H(k): the noisy bands themselves
    are no longer those of the compound.)
    """
    read = undeclared(case)
    declared = build_inversion(declared_basis(case), read.crystal, ORIGIN)
    sound = parities(case, declared)
    for seed in range(2):
        noisy = with_noise(read.lattice.model, 0.02, np.random.default_rng(seed))
        found = infer_inversion(noisy, read.crystal, read.sites, ORIGIN, spinful=True)
        assert found.reliability == "good", found.reason
        assert found.operator is not None
        aligned = align_sign(found.operator, declared)
        assert np.linalg.norm(aligned.matrix - declared.matrix, ord=2) < 0.05
        witness = parities(case, aligned)
        assert odd_states(witness) == odd_states(sound)
        assert witness.z2 == sound.z2


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_on_a_noisy_hamiltonian_both_operators_say_the_same(case: str) -> None:
    """20 meV on each element of H(k): the same states, impure or not, read with either operator."""
    read = undeclared(case)
    declared = build_inversion(declared_basis(case), read.crystal, ORIGIN)
    model = read.lattice.model
    noisy = with_noise(model, 0.02 / np.sqrt(model.n_r), np.random.default_rng(7))
    lattice = LatticeHamiltonian(noisy, build_bloch_sum(noisy))
    found = infer_inversion(noisy, read.crystal, read.sites, ORIGIN, spinful=True)
    assert found.reliability == "good", found.reason
    assert found.operator is not None
    by_inferred = parities(case, align_sign(found.operator, declared), lattice)
    by_declared = parities(case, declared, lattice)
    assert by_inferred.status == by_declared.status
    assert odd_states(by_inferred) == odd_states(by_declared)
    assert by_inferred.z2 == by_declared.z2


def test_centres_on_a_wrong_branch_are_refused_as_they_stand() -> None:
    """Without moving the strays the sites have no inversion, and the message names a function."""
    read = undeclared("Bi2Se3_centres_off")
    folder = find_case(CASES / "Bi2Se3_centres_off")
    assert folder.centres is not None
    centres = read_centres(folder.centres, 30).centres_cart @ np.linalg.inv(read.crystal.cell)
    sites = assign_sites(centres, read.crystal, model=read.bare.model)
    found = infer_inversion(read.bare.model, read.crystal, sites, ORIGIN, spinful=True)
    assert found.reliability == "refused"
    assert "moves the site of function 19" in found.reason


@pytest.mark.parametrize("case", ["BiTeI", "BiTeI_pressed"])
def test_false_inversion_of_bitei_is_refused(case: str) -> None:
    """Tellurium and iodine put on each other's images about bismuth, against all evidence."""
    read = undeclared(case)
    assert infer(case).reason == "the structure has no inversion about (0, 0, 0)"
    x = read.sites.positions_frac - read.sites.positions_frac[0]
    images = np.round(x[1] + x[2])
    half = (x[1] - (x[2] - images)) / 2
    forged = np.array([x[0], half, images - half]) + read.sites.positions_frac[0]
    bare = replace(read.crystal, symbols=(), positions_frac=np.zeros((0, 3)))
    found = infer_inversion(
        read.lattice.model,
        bare,
        replace(read.sites, positions_frac=forged),
        read.sites.positions_frac[0],
        spinful=True,
    )
    assert found.reliability == "refused"
    assert found.misfit is not None
    assert found.misfit > 0.28
    assert found.rms_residual_mev is not None
    assert found.rms_residual_mev > 1000


def test_structure_file_with_another_origin_is_measured() -> None:
    """The atoms of Bi2Se3 moved along c: the Hamiltonian keeps its own inversion centre."""
    read = undeclared("Bi2Se3")
    moved = np.array([0.04, 0.04, 0.04])
    crystal = replace(read.crystal, positions_frac=read.crystal.positions_frac + moved)
    folder = find_case(CASES / "Bi2Se3")
    assert folder.centres is not None
    centres = read_centres(folder.centres, 30).centres_cart @ np.linalg.inv(crystal.cell)
    sites = assign_sites(centres, crystal, model=read.lattice.model)
    model = read.lattice.model
    assert infer_inversion(model, crystal, sites, moved, spinful=True).reliability == "refused"
    best = search_centres(model, crystal, sites, moved[None], spinful=True)[0]
    assert best.inferred.reliability == "good"
    assert best.shift_frac is not None
    np.testing.assert_allclose(best.shift_frac, -moved, atol=1e-4)
    assert best.shift_ang == pytest.approx(0.04 * 28.64, abs=0.01)


def _checked(case: str, basis: OrbitalBasis) -> DeclarationCheck:
    read = undeclared(case)
    return compare_declaration(
        read.lattice,
        read.crystal,
        basis,
        read.sites,
        ORIGIN,
        np.array([ORIGIN]),
        spinful=True,
    )


def _letters(basis: OrbitalBasis) -> list[str]:
    return [re.sub(r"(p)[xyz]", r"\1", label) for label in basis.labels]


@pytest.mark.parametrize("case", CENTROSYMMETRIC)
def test_sound_declarations_agree_with_the_hamiltonian(case: str) -> None:
    found = _checked(case, declared_basis(case))
    assert found.declared.worst_mev < 0.2
    assert found.inferred_fit.worst_mev < 0.2
    assert found.disagreeing == ()
    assert found.corrections == ()


SLIPS = {
    "lines swapped": ("Bi2Se3", [*range(12, 30), *range(12)], "site-order"),
    "lines swapped in rock salt": ("PbTe", [*range(6, 12), *range(6)], "site-order"),
    "p before s": ("Sb", [*range(2, 8), 0, 1, *range(10, 16), 8, 9], "line-order"),
    "by orbital, not by atom": ("Si", [0, 1, 8, 9, *range(2, 8), *range(10, 16)], "site-order"),
    "spin in blocks": ("Sb2Se3", np.arange(30).reshape(-1, 2).T.reshape(-1), "spin-order"),
}


@pytest.mark.parametrize("slip", SLIPS)
def test_slips_of_the_pen_are_named(slip: str) -> None:
    case, order, kind = SLIPS[slip]
    right = declared_basis(case)
    wrong = right.reordered(np.array(order))
    found = _checked(case, wrong)
    assert found.declared.worst_mev > 1000
    assert found.disagreeing
    best = found.corrections[0]
    assert best.reading.kind == kind
    assert best.fit.worst_mev < 0.2
    assert best.reading.order is not None
    assert _letters(wrong.reordered(np.array(best.reading.order))) == _letters(right)


def test_rock_salt_lines_swapped_look_sound_at_the_trim() -> None:
    """p on both atoms: no TRIM sees which line came first, generic k do by volts."""
    case, order, _ = SLIPS["lines swapped in rock salt"]
    found = _checked(case, declared_basis(case).reordered(np.array(order)))
    assert found.declared.trim_mev is not None
    assert found.declared.generic_mev is not None
    assert found.declared.trim_mev < 0.1
    assert found.declared.generic_mev > 1000


@pytest.mark.parametrize("case", ["Sb", "Si"])
def test_p_declared_for_s_is_named(case: str) -> None:
    right = declared_basis(case)
    rows = [n for n, label in enumerate(right.labels) if " s " in label]
    harmonics, shells = right.harmonics.copy(), right.shells.copy()
    harmonics[rows] = harmonics[2]
    shells[rows] = 2
    found = _checked(case, replace(right, harmonics=harmonics, shells=shells))
    assert found.declared.worst_mev > 1000
    assert found.disagreeing == tuple(rows)
    best = found.corrections[0].reading
    assert (best.kind, best.order, best.flipped) == ("parity", None, tuple(rows))
    assert found.corrections[0].fit.worst_mev < 0.2
