"""The Hamiltonian's own group: equal, smaller for each reason, larger, magnetic.

Numbers of magnetic groups are those of Belov, Neronova, Smirnova, Sov. Phys. Crystallogr. 2, 311
(1957), from memory: P4/mm'm' is 123.345, the group of a ferromagnet along z in a tetragonal cell.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
import pytest

from lattice_models import LatticeModel, fu_kane_mele, kane_mele, wilson_dirac
from topovet.arrays import FloatArray
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel, build_model, r_index
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.group import measure_group
from topovet.symmetry.group_results import GroupTest, OperationTest
from topovet.symmetry.operation_test import MOST_MESH_POINTS, mesh_sample
from topovet.symmetry.spacegroup import find_space_group

MESH = (4, 4, 4)
DIRAC = wilson_dirac(m=-2.0)


@pytest.fixture(autouse=True)
def _one_thread() -> Iterator[None]:
    with one_blas_thread():
        yield


def group_of(
    model: LatticeModel,
    *,
    built: TightBindingModel | None = None,
    unshifted: TightBindingModel | None = None,
    structure: Crystal | None = None,
    mesh: tuple[int, int, int] | None = MESH,
    filling: int | None = None,
) -> GroupTest:
    built = model.tight_binding() if built is None else built
    crystal = model.crystal if structure is None else structure
    return measure_group(
        built,
        build_bloch_sum(built),
        None if unshifted is None else build_bloch_sum(unshifted),
        model.basis,
        crystal,
        find_space_group(crystal),
        mesh,
        filling=filling,
    )


def changed(model: LatticeModel, r: tuple[int, int, int], block: FloatArray) -> TightBindingModel:
    """The model with a Hermitian pair of hoppings added."""
    built = model.tight_binding()
    extra = np.array([block, block.conj().T], dtype=complex) * (0.5 if r == (0, 0, 0) else 1.0)
    r_cells = np.concatenate([built.r_cells, [r, tuple(-x for x in r)]])
    return build_model(r_cells, np.concatenate([built.h_r, extra]), spinful=built.spinful)


def named(group: GroupTest, name: str) -> OperationTest:
    return next(test for test in (*group.tests, *group.additional) if test.name == name)


def on_s(amount: float, n_orb: int = 8) -> FloatArray:
    return np.diag([amount, amount, *np.zeros(n_orb - 2)])


def test_exact_model_has_all_of_its_structure() -> None:
    group = group_of(DIRAC, filling=2)
    assert group.relation == "equal"
    assert (group.own.number, group.own.symbol) == (221, "Pm-3m")
    assert group.own.magnetic == "221.93"  # grey
    assert len(group.kept) == 48
    assert group.magnetic == ()
    assert max(t.violation_mev + t.violation_r_mev for t in group.tests) < 1e-9
    assert max(t.judged_shift_mev for t in group.tests) < 1e-9
    assert group.in_bands is not None
    assert group.in_bands.number == 221
    assert group.closure_defect < 1e-13
    assert group.n_mesh == 64
    assert group.sentence.startswith("The Hamiltonian has all 48 operations of Pm-3m (221)")


def test_strain_along_z_leaves_the_tetragonal_group() -> None:
    """s-s hopping raised by 30 meV along z: sizes by hand, 4 x 30 meV between k_z and k_x."""
    group = group_of(DIRAC, built=changed(DIRAC, (0, 0, 1), on_s(0.03)), filling=2)
    assert group.relation == "smaller"
    assert (group.own.number, len(group.kept)) == (123, 16)
    lost = named(group, "3+ [1 1 1]")
    assert lost.status == "broken"
    assert lost.violation_mesh_mev == pytest.approx(120, rel=1e-6)
    assert lost.violation_r_mev == pytest.approx(30, rel=1e-6)
    assert named(group, "4+ [0 0 1]").status == "holds"
    assert group.in_bands is not None
    assert group.in_bands.number == 123
    assert "32 are broken, by up to 120 meV" in group.sentence


def test_what_counts_is_the_tolerance_of_one_mev() -> None:
    for amount, held in ((0.0002, 48), (0.0004, 16)):
        group = group_of(DIRAC, built=changed(DIRAC, (0, 0, 1), on_s(amount)))
        assert len(group.kept) == held


def test_without_filling_nothing_is_said_of_bands() -> None:
    group = group_of(DIRAC, built=changed(DIRAC, (0, 0, 1), on_s(0.03)))
    assert group.in_bands is None
    lost = named(group, "3+ [1 1 1]")
    assert (lost.band_shift_mev, lost.in_bands, lost.status) == (None, None, "broken")


def test_bent_wannier_functions_are_told_from_a_broken_crystal() -> None:
    """Orbitals px and pz turned into each other by 1 degree, declared as they were: same bands."""
    angle = np.radians(1.0)
    turn = np.eye(8)
    for spin in (0, 1):
        z, x = 2 + spin, 4 + spin
        turn[np.ix_([z, x], [z, x])] = [
            [np.cos(angle), -np.sin(angle)],
            [np.sin(angle), np.cos(angle)],
        ]
    built = DIRAC.tight_binding()
    bent = TightBindingModel(built.r_cells, turn.T @ built.h_r @ turn, True)
    group = group_of(DIRAC, built=bent, filling=2)
    lost = named(group, "4+ [0 0 1]")
    assert lost.status == "bands-only"
    assert lost.judged_mev > 10
    assert lost.judged_shift_mev < 1e-9
    assert named(group, "-1").status == "holds"
    assert len(group.kept) < 48
    assert group.in_bands is not None
    assert group.in_bands.number == 221
    assert "broken by the Wannier functions" in group.sentence


def test_lost_inversion_shows_in_the_pairs_of_bands() -> None:
    """With time reversal E(-k) = E(k) always; a polar term splits the pairs instead."""
    group = group_of(kane_mele(lambda_r=0.05), mesh=(6, 6, 1), filling=2)
    inversion = named(group, "-1")
    assert group.time_reversal.holds
    assert inversion.status == "broken"
    assert inversion.band_shift_mesh_mev > 10
    turn = named(group, "6+ [0 0 1]")
    assert turn.status == "holds"
    assert group.own.symbol == "P6mm"
    # E(m k) = E(k) for the mirror in the layer follows from C2 and time reversal: no evidence
    mirror = named(group, "m [0 0 1]")
    assert mirror.band_shift_mesh_mev < 1e-9
    assert (mirror.in_bands, mirror.status) == (None, "broken")
    assert group.in_bands is not None
    assert group.in_bands.symbol == "P6mm"


def test_bands_of_a_layer_know_nothing_of_its_own_mirror() -> None:
    """A field in the plane breaks the mirror z -> -z, which leaves every k of the layer alone."""
    layer = kane_mele()
    built = changed(layer, (0, 0, 0), 0.1 * np.kron(np.eye(2), np.array([[0, 1], [1, 0]])))
    group = group_of(layer, built=built, mesh=(6, 6, 1), filling=2)
    mirror = named(group, "m [0 0 1]")
    assert mirror.judged_mev > 100
    assert mirror.band_shift_mesh_mev == pytest.approx(0, abs=1e-9)
    assert (mirror.in_bands, mirror.status) == (None, "broken")


def test_ferromagnet_has_a_magnetic_group() -> None:
    group = group_of(wilson_dirac(m=-2.0, zeeman=0.1), filling=2)
    assert not group.time_reversal.holds
    assert group.time_reversal.judged_mev == pytest.approx(200, rel=1e-6)
    assert len(group.magnetic) == 47
    assert (group.own.number, group.own.symbol) == (83, "P4/m")
    assert group.own.magnetic == "123.345"
    assert len(group.own.members) == 16
    assert named(group, "2 [1 0 0] Θ").holds
    assert not named(group, "2 [0 0 1] Θ").holds
    # C2x Θ and inversion make E(C2x k) = E(k), though C2x is broken: nobody blames the functions
    turn = named(group, "2 [1 0 0]")
    assert turn.band_shift_mesh_mev < 1e-9
    assert (turn.in_bands, turn.status) == (None, "broken")
    assert "Wannier functions" not in group.sentence
    assert group.in_bands is not None
    assert group.in_bands.magnetic == "123.345"
    assert "Time reversal is broken by 200 meV" in group.sentence
    assert group.closure_defect < 1e-13


def test_antiferromagnet_keeps_time_reversal_with_a_translation() -> None:
    """Two cells along z with opposite fields: type IV, Theta with the half translation."""
    one = wilson_dirac(m=-2.0)
    small, n = one.tight_binding(), one.n_orb
    blocks: dict[tuple[int, int, int], FloatArray] = {}
    for (x, y, z), h in zip(small.r_cells.tolist(), small.h_r, strict=True):
        for layer in (0, 1):
            cell, other = divmod(layer + z, 2)
            target = blocks.setdefault((x, y, cell), np.zeros((2 * n, 2 * n), dtype=complex))
            target[layer * n : layer * n + n, other * n : other * n + n] += h
    field = np.diag([0.1, -0.1, *np.zeros(n - 2)])
    blocks[0, 0, 0][:n, :n] += field
    blocks[0, 0, 0][n:, n:] -= field
    built = build_model(np.array(list(blocks)), np.array(list(blocks.values())), spinful=True)
    sites = np.array([[0, 0, 0], [0, 0, 0.5]])
    basis = one.basis.reordered(np.tile(np.arange(n), 2))
    basis = replace(basis, positions_frac=np.repeat(sites, n, axis=0))
    crystal = Crystal(one.crystal.cell * np.array([[1], [1], [2]]), ("Bi", "Bi"), sites)
    double = replace(one, basis=basis, crystal=crystal)
    group = group_of(double, built=built, mesh=None)
    assert not group.time_reversal.holds
    assert not named(group, "1 + (0, 0, 1/2)").holds
    assert named(group, "Θ + (0, 0, 1/2)").holds
    antiunitary = [group.tests[i].antiunitary for i in group.own.members]
    assert sum(antiunitary) == len(antiunitary) / 2


def test_structure_file_less_symmetric_than_the_hamiltonian() -> None:
    """Diamond told as zincblende: its inversion and half of its operations are found on H."""
    model = fu_kane_mele(lambda_so=0.05)
    told = replace(model.crystal, symbols=("Ga", "As"))
    group = group_of(model, structure=told)
    assert group.structure_number == 216
    assert len(group.kept) == 24
    assert group.relation == "larger"
    assert len(group.additional) == 24
    assert (group.larger_number, group.larger_symbol) == (227, "Fd-3m")
    assert group.n_candidates == 24
    inversion = next(t for t in group.additional if np.array_equal(t.rotation, -np.eye(3)))
    assert inversion.violation_r_mev < 1e-6
    assert "24 operations that the structure lacks" in group.sentence


def test_displaced_atoms_of_the_structure_file() -> None:
    """0.1 A off along the bond: R3m on paper, Fd-3m in the Hamiltonian."""
    model = fu_kane_mele(lambda_so=0.05)
    shift = np.array([[0, 0, 0], [0.015, 0.015, 0.015]])
    told = replace(model.crystal, positions_frac=model.crystal.positions_frac + shift)
    declared = replace(model, basis=replace(
        model.basis, positions_frac=model.basis.positions_frac + np.repeat(shift, 2, axis=0)
    ))  # fmt: skip
    group = group_of(declared, structure=told)
    assert group.structure_number == 166
    assert group.larger_number == 227
    assert len(group.additional) == 36


def test_candidates_that_do_not_hold_are_not_told() -> None:
    """Zincblende in earnest: other levels on the two sites."""
    model = fu_kane_mele(lambda_so=0.05)
    level = np.diag([0.4, 0.4, -0.4, -0.4])
    told = replace(model.crystal, symbols=("Ga", "As"))
    group = group_of(model, built=changed(model, (0, 0, 0), level), structure=told)
    assert group.relation == "equal"
    assert group.n_candidates == 24
    assert group.additional == ()


def test_orbitals_that_are_not_closed_are_named() -> None:
    """px without py and pz: quarter turns about x alone can be written."""
    px = replace(
        DIRAC,
        basis=DIRAC.basis.reordered(np.array([0, 1, 4, 5])),
        h_r=DIRAC.h_r[:, [0, 1, 4, 5]][:, :, [0, 1, 4, 5]],
    )
    group = group_of(px)
    missing = named(group, "4+ [0 0 1]")
    assert missing.status == "missing"
    assert "Bi1 px up, Bi1 px down are not mapped" in missing.missing
    assert missing.violation_mev is None
    assert named(group, "4+ [1 0 0]").missing == ""
    assert "have no operator in the declared basis" in group.sentence
    assert len([t for t in group.operations if t.missing]) == 32


def test_shifts_between_mesh_points_do_not_decide() -> None:
    """A hopping shared unequally by two equal images: the mesh does not see it, other k do."""
    with_far = changed(DIRAC, (2, 0, 0), on_s(0.05))
    at = [int(r_index(with_far.r_cells, np.array([r]))[0]) for r in ([2, 0, 0], [-2, 0, 0])]
    # on a mesh of 4 points R = 2 and R = -2 are the same: an imaginary, odd part is invisible
    h_r = with_far.h_r.copy()
    h_r[at[0]] += 1j * on_s(0.02)
    h_r[at[1]] -= 1j * on_s(0.02)
    shifted = TightBindingModel(with_far.r_cells, h_r, True)
    k = mesh_sample(MESH)
    np.testing.assert_allclose(
        build_bloch_sum(shifted).at(k), build_bloch_sum(with_far).at(k), atol=1e-12
    )
    group = group_of(DIRAC, built=shifted, unshifted=with_far)
    inversion = named(group, "-1")
    assert inversion.violation_mev > 50
    assert inversion.violation_mesh_mev < 1e-9
    assert inversion.holds
    blind = group_of(DIRAC, built=shifted, unshifted=with_far, mesh=None)
    assert not named(blind, "-1").holds
    assert named(blind, "-1").violation_mesh_mev is None
    assert blind.n_mesh == 0


def test_mesh_that_an_operation_does_not_keep() -> None:
    """4 x 4 x 3 under a turn that takes z to x: too few points are left, sampled k decide."""
    group = group_of(DIRAC, mesh=(4, 4, 3))
    assert named(group, "3+ [1 1 1]").violation_mesh_mev is None
    assert named(group, "3+ [1 1 1]").holds
    assert named(group, "4+ [0 0 1]").violation_mesh_mev is not None


def test_left_out_operations_are_named() -> None:
    """Two mirrors at 0.6 meV each hold, their product at 1.2 meV does not: one has to go."""
    along = changed(DIRAC, (1, 0, 0), 1j * on_s(0.00014))
    built = along.h_r.copy()
    for r, sign in (([0, 1, 0], 1), ([0, -1, 0], -1)):
        at = int(r_index(along.r_cells, np.array([r]))[0])
        built[at] += sign * 1j * on_s(0.00014)
    group = group_of(DIRAC, built=TightBindingModel(along.r_cells, built, True), mesh=(8, 8, 8))
    assert group.own.dropped
    assert "would be no group" in group.sentence
    kept = {test.name for test in group.kept}
    assert not kept & set(group.own.dropped)


@pytest.mark.parametrize("mesh", [(4, 4, 4), (6, 6, 6), (12, 10, 1), (3, 1, 1), (7, 5, 2)])
def test_mesh_sample_is_part_of_the_mesh(mesh: tuple[int, int, int]) -> None:
    k = mesh_sample(mesh)
    n_all = int(np.prod(mesh))
    assert len(k) == min(n_all, MOST_MESH_POINTS)
    index = k * np.array(mesh)
    np.testing.assert_allclose(index, np.round(index), atol=1e-9)
    assert len(np.unique(np.round(index), axis=0)) == len(k)
    assert not k[0].any()
