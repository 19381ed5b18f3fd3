"""Each way of reading a case anew, on a model whose answer is known."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from diagnosis_subjects import PAULI_Z, lattice_of, subject_of, with_onsite

from lattice_models import LatticeModel, fu_kane_mele, kane_mele, wilson_dirac
from model_changes import with_order
from topovet.diagnosis.rereadings import (
    look_closer,
    reread_bare,
    reread_declaration,
    reread_fillings,
    reread_inferred,
    reread_shorter,
    reread_symmetrised,
)
from topovet.errors import NoInversionError
from topovet.symmetry.declaration_check import compare_declaration, corrected_inversion
from topovet.symmetry.declaration_results import DeclarationCheck
from topovet.symmetry.declaration_trials import Reading
from topovet.symmetry.inversion import build_inversion
from topovet.symmetry.sites import declared_sites
from topovet.symmetry.spacegroup import find_space_group

GRAPHENE = kane_mele()
DIRAC = wilson_dirac(m=-2.0)
DIAMOND = fu_kane_mele(dt=(0.4, 0, 0, 0))


def check_of(model: LatticeModel, centre: np.ndarray | None = None) -> DeclarationCheck:
    """The declaration of a model held against its Hamiltonian; its sites are where they are."""
    true_centre = np.array(model.centre)
    return compare_declaration(
        lattice_of(model),
        model.crystal,
        model.basis,
        declared_sites(model.basis.positions_frac, model.crystal),
        true_centre if centre is None else centre,
        true_centre[None],
        spinful=True,
    )


# --- H averaged


def test_mean_over_the_group_has_its_symmetry() -> None:
    """10 meV of staggered potential and a field of 2 meV: the average has neither."""
    spoilt = with_onsite(GRAPHENE, 0.01 * np.kron(PAULI_Z, np.eye(2)))
    spoilt = with_onsite(spoilt, 0.002 * np.kron(np.eye(2), PAULI_Z))
    subject = subject_of(spoilt)
    assert not subject.time_reversal.present
    group = find_space_group(GRAPHENE.crystal)
    found = reread_symmetrised(subject, GRAPHENE.basis, group, reversal=True)
    assert found is not None
    assert found.inversion.violation_mev == pytest.approx(0, abs=1e-6)
    assert found.time_reversal.present
    assert found.time_reversal.violation_mev == pytest.approx(0, abs=1e-6)
    # the difference is +-10 meV on the sites and +-2 meV on the spins
    assert found.moved_mev == pytest.approx(12, abs=0.01)
    assert found.z2 == (1,)


def test_mean_without_time_reversal_keeps_a_field() -> None:
    """A field along the axis has all rotations of the plane but no time reversal."""
    magnetic = with_onsite(GRAPHENE, 0.01 * np.kron(np.eye(2), PAULI_Z))
    group = find_space_group(GRAPHENE.crystal)
    kept = [i for i, w in enumerate(group.rotations) if w[2, 2] * np.linalg.det(w) > 0]
    axial = replace(group, rotations=group.rotations[kept], translations=group.translations[kept])
    found = reread_symmetrised(subject_of(magnetic), GRAPHENE.basis, axial, reversal=False)
    assert found is not None
    assert not found.time_reversal.present
    assert found.z2 is None


def test_no_mean_where_the_orbitals_are_not_closed() -> None:
    harmonics = GRAPHENE.basis.harmonics.copy()
    harmonics[:2] = np.roll(harmonics[:2], 1, axis=1)  # another orbital on one of the two sites
    only_one = replace(GRAPHENE.basis, harmonics=harmonics)
    group = find_space_group(GRAPHENE.crystal)
    assert reread_symmetrised(subject_of(GRAPHENE), only_one, group, reversal=True) is None


# --- other fillings


def test_other_fillings() -> None:
    subject = subject_of(GRAPHENE, filling=1)
    found = {r.filling: r for r in reread_fillings(subject)}
    assert set(found) == {2}  # 0 and below hold no band, 4 is all of them, pairs are not split
    assert found[2].z2 == (1,)
    assert found[2].gap.direct_ev == pytest.approx(6 * np.sqrt(3) * 0.06, abs=1e-6)
    assert "2 occupied bands in place of 1" in found[2].change


def test_a_counted_filling_is_looked_at_as_well() -> None:
    subject = subject_of(DIRAC, filling=7)
    assert [r.filling for r in reread_fillings(subject, (2, 7))] == [2, 6]


def test_without_kramers_pairs_odd_fillings_count() -> None:
    magnetic = with_onsite(DIRAC, 0.5 * np.kron(np.eye(4), PAULI_Z))
    assert [r.filling for r in reread_fillings(subject_of(magnetic))] == [1, 3, 4]


# --- range


def further(model: LatticeModel, hopping_ev: float) -> LatticeModel:
    """Hoppings of every function to itself two and three cells along a1, equal for all."""
    cells = [[2, 0, 0], [-2, 0, 0], [3, 0, 0], [-3, 0, 0]]
    blocks = np.array([0.1, 0.1, hopping_ev, hopping_ev])[:, None, None] * np.eye(model.n_orb)
    return replace(
        model,
        r_cells=np.concatenate([model.r_cells, cells]),
        h_r=np.concatenate([model.h_r, blocks]),
    )


def test_shorter_range() -> None:
    """2 t cos(6 pi k) on all bands alike moves them by 2 t at most and no index at all."""
    found = reread_shorter(subject_of(further(DIRAC, 0.003)))
    assert found is not None
    assert found.moved_mev == pytest.approx(6, abs=1e-6)
    assert found.z2 == (1, 0, 0, 0)


def test_nearest_neighbours_have_nothing_to_spare() -> None:
    assert reread_shorter(subject_of(DIRAC)) is None


def test_bare_reading() -> None:
    bare = lattice_of(with_onsite(GRAPHENE, 0.007 * np.kron(PAULI_Z, np.eye(2))))
    found = reread_bare(subject_of(GRAPHENE), bare)
    assert found.moved_mev is not None
    assert 0 < found.moved_mev <= 7 + 1e-6
    assert found.inversion.violation_mev == pytest.approx(14, abs=1e-6)


# --- declaration


def test_corrected_declaration() -> None:
    """s declared where p is: parities of the right order are those of the model."""
    order = np.array([2, 3, 0, 1, 4, 5, 6, 7])
    declared = replace(DIRAC, basis=DIRAC.basis.reordered(order))
    check = check_of(declared)
    subject = subject_of(declared)
    assert subject.inversion.violation_mev is not None
    assert subject.inversion.violation_mev > 100
    found = reread_declaration(subject, declared.basis, check.corrections[0], "other order")
    assert found.kind == "declaration"
    assert found.inversion.violation_mev == pytest.approx(0, abs=1e-6)
    assert found.z2 == (1, 0, 0, 0)


def test_other_centre() -> None:
    check = check_of(DIAMOND, np.array([0.25, 0.25, 0.25]))
    by_centre = next(c for c in check.corrections if c.reading.kind == "centre")
    found = reread_declaration(subject_of(DIAMOND), DIAMOND.basis, by_centre, "other centre")
    assert found.kind == "centre"
    assert found.z2 == (1, 1, 1, 1)
    assert found.inversion.violation_mev == pytest.approx(0, abs=1e-6)


def test_correction_of_another_basis_is_refused() -> None:
    check = check_of(DIAMOND, np.array([0.25, 0.25, 0.25]))
    nowhere = replace(
        check.corrections[0], centre_frac=(0.3, 0.1, 0.2), reading=Reading("centre", None)
    )
    with pytest.raises(NoInversionError):
        corrected_inversion(DIAMOND.basis, DIAMOND.crystal, nowhere)


def test_inversion_that_the_hamiltonian_has_itself() -> None:
    order = np.array([2, 3, 0, 1, 4, 5, 6, 7])
    declared = replace(DIRAC, basis=DIRAC.basis.reordered(order))
    check = check_of(declared)
    subject = subject_of(declared)
    found = reread_inferred(subject, check.inferred, "declaration", "as inferred")
    assert found is not None
    assert found.inversion.basis == "inferred"
    assert found.z2 == (1, 0, 0, 0)
    refused = replace(check.inferred, reliability="refused")
    assert reread_inferred(subject, refused, "declaration", "as inferred") is None


def test_order_of_the_hamiltonian_does_not_matter_to_its_own_inversion() -> None:
    shuffled = with_order(DIRAC, np.array([6, 7, 0, 1, 4, 5, 2, 3]))
    check = check_of(shuffled)
    operator = build_inversion(shuffled.basis, shuffled.crystal, np.zeros(3))
    subject = subject_of(shuffled, operator=operator)
    found = reread_inferred(subject, check.inferred, "declaration", "as inferred")
    assert found is not None
    assert found.z2 == (1, 0, 0, 0)


# --- nothing changed


def test_closer_look_agrees_and_looks_at_more() -> None:
    subject = subject_of(GRAPHENE)
    found = look_closer(subject)
    assert found.z2 == (1,)
    assert found.moved_mev is None
    assert np.prod(found.gap.mesh) > 64
    assert found.gap.direct_ev == pytest.approx(6 * np.sqrt(3) * 0.06, abs=1e-6)
