"""Mirror Chern numbers of a whole group: planes, signs between planes, what they say of Z2."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from chern_models import double_wilson_dirac, layered_bhz, snte
from lattice_models import LatticeModel, bhz, fu_kane_mele, kane_mele, wilson_dirac
from mirror_groups import grouped
from model_changes import with_home_cells
from space_group_samples import atomic_basis, orbit, sample_group
from topovet.invariants.mirror_indicators import compute_mirror_indicators
from topovet.invariants.mirror_witness import compute_mirror_witness, proper_mirrors
from topovet.invariants.wilson_sheet import SheetCriteria
from topovet.invariants.wilson_witness import compute_wilson
from topovet.symmetry.equivalent_planes import plane_key

MODELS = [
    snte(),
    wilson_dirac(m=-2.0),
    wilson_dirac(m=0.4),
    wilson_dirac(m=2.0),
    double_wilson_dirac(),
    layered_bhz(),
    fu_kane_mele(dt=(0.4, 0, 0, 0)),
    bhz(m=1.0),
    bhz(m=5.0),
    kane_mele(),
    kane_mele(lambda_v=0.5),
]


def z2_of(model: LatticeModel) -> tuple[int, ...]:
    z2 = compute_wilson(
        grouped(model).bloch,
        model.filling,
        model.crystal.periodic,
        time_reversal=True,
        spinful=True,
    ).z2
    assert z2 is not None
    return z2


@pytest.mark.parametrize("model", MODELS, ids=lambda m: m.name)
def test_numbers_taken_over_are_those_counted(model: LatticeModel) -> None:
    """Signs included, on planes at the zone boundary as well."""
    taken, counted = (grouped(model).mirror_witness(by_symmetry=s) for s in (True, False))
    assert taken.status == counted.status == "ok"
    assert taken.numbers == counted.numbers
    assert taken.n_solves <= counted.n_solves
    assert all(plane.evidence is None for plane in taken.planes if plane.taken_from)


@pytest.mark.parametrize("model", MODELS, ids=lambda m: m.name)
def test_parity_is_the_z2_of_the_plane(model: LatticeModel) -> None:
    """Teo, Fu, Kane, PRB 78, 045426 (2008): against Wilson loops, which know no mirror."""
    witness, z2 = grouped(model).mirror_witness(), z2_of(model)
    assert witness.contradicts(z2) == ()
    assert z2 in witness.allowed_z2(model.crystal.dimension)
    known = witness.z2(model.crystal.dimension)
    assert all(a in (None, b) for a, b in zip(known, z2, strict=True))


@pytest.mark.parametrize("model", MODELS, ids=lambda m: m.name)
def test_rotation_eigenvalues_say_the_same_modulo_n(model: LatticeModel) -> None:
    """Sign and orientation of counted numbers agree with those of the indicators."""
    case = grouped(model)
    found = compute_mirror_indicators(case.bloch, case.operators, model.crystal, model.filling)
    by_key = {(p.row, p.half): p for p in case.mirror_witness().planes}
    for indicator in found:
        normal, offset = plane_key(indicator.plane)
        plane = by_key[normal, offset > 0]
        sign = round(float(np.dot(plane.normal_cart, indicator.axis_cart)))
        assert plane.number is not None
        assert indicator.mirror_chern is not None
        assert (sign * plane.number - indicator.mirror_chern) % indicator.n == 0


def test_no_number_depends_on_the_home_cells_of_orbitals() -> None:
    model = wilson_dirac(m=2.0)
    moved = with_home_cells(model, np.repeat([[0, 0, 0], [1, 0, -1]], [2, 6], axis=0))
    assert grouped(moved).mirror_witness().numbers == grouped(model).mirror_witness().numbers


def test_contradictions_are_named() -> None:
    witness = grouped(wilson_dirac(m=-2.0)).mirror_witness()
    assert witness.contradicts((1, 0, 0, 0)) == ()
    wrong = {plane.name for plane in witness.contradicts((0, 0, 0, 0))}
    assert wrong == {name for name, number in witness.numbers.items() if number % 2}
    flipped = replace(witness, planes=(replace(witness.planes[0], number=0), *witness.planes[1:]))
    assert flipped.allowed_z2(3) == ()
    assert flipped.z2(3) == (None,) * 4


def test_a_budget_leaves_planes_open() -> None:
    case, budget = grouped(snte()), SheetCriteria(max_solves=50)
    witness = compute_mirror_witness(
        case.bloch, case.mirrors(), case.operators, case.model.crystal, 6, budget
    )
    assert witness.status == "unresolved"
    assert "budget" in witness.reason
    assert witness.numbers == {}
    assert len(witness.allowed_z2(3)) == 16


def opposite_valleys(strength: float) -> LatticeModel:
    """Kane and Mele's model, trivial, with s_z f(k) besides: up is lowered at K, down at K'.

    f is the sum of sines of Haldane's model on both sublattices alike. It keeps time reversal and
    the mirror in the plane; where |f| exceeds half of the gap at K a ring opens in which both
    filled bands have the same spin.
    """
    model = kane_mele(lambda_v=0.5)
    haldane = kane_mele(lambda_so=strength).h_r - kane_mele(lambda_so=0.0).h_r
    haldane[:, 2:, 2:] *= -1
    return replace(model, h_r=model.h_r + haldane)


def test_a_gap_that_closes_on_a_mirror_plane_is_found_between_points() -> None:
    """Filled states change mirror eigenvalues over the plane: there is a ring of crossings."""
    open_gap = grouped(opposite_valleys(0.02)).mirror_witness()
    assert (open_gap.status, open_gap.numbers) == ("ok", {"m(0 0 1) k=0": 0})
    (plane,) = grouped(opposite_valleys(0.1)).mirror_witness().planes
    assert (plane.status, plane.number) == ("failed", None)
    assert "the gap closes on the plane" in plane.reason
    assert plane.evidence is not None
    k = plane.evidence.closes_near
    assert k is not None
    bands = np.linalg.eigh(opposite_valleys(0.1).hamiltonian_at(k))[1][:, :2]
    spins = (np.abs(bands[::2]) ** 2).sum(axis=0)  # up components
    np.testing.assert_allclose(spins, spins[0])  # both up, or both down


@pytest.mark.parametrize(("number", "glides"), [(26, 1), (62, 2), (227, 3), (194, 3), (221, 0)])
def test_glides_are_left_out(number: int, glides: int) -> None:
    sample = sample_group(number)
    operators = sample.operators(atomic_basis(orbit(sample, (0, 0, 0)), 0))
    reflections = [
        (o, 0.0)
        for o in operators
        if not o.antiunitary
        and np.trace(o.rotation) == 1
        and round(float(np.linalg.det(o.rotation))) == -1
    ]
    found, left_out = proper_mirrors(reflections, sample.crystal)
    assert len(found) == len(reflections) - glides
    assert len(left_out) == (1 if glides else 0)
    for mirror in found:
        glide = (np.eye(3) + mirror.operator.rotation) @ mirror.operator.translation
        np.testing.assert_allclose(glide, 0, atol=1e-9)
