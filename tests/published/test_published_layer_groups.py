"""Layer groups: indicators against the published table, models of the literature."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from lattice_models import LatticeModel, Terms, bhz, bonds, build_basis, honeycomb_cell, kane_mele
from layer_group_samples import layer_groups
from mirror_groups import grouped
from topovet.invariants.band_reps.results import ATOMIC, STABLE, UNRESOLVED, BandRepWitness
from topovet.invariants.band_reps.witness import GroupInUse, compute_band_rep_witness
from topovet.model.crystal import Crystal
from topovet.symmetry.bandreps.compatibility import relation_rank
from topovet.symmetry.bandreps.layers import find_layer

WITH_SPIN = {
    (2,): {2, 6, 7, *range(14, 19), *range(37, 49), 52, 62, 64, 66, 71, 72},
    (3,): {74, 78, 79},
    (4,): {51, 61, 63},
    (6,): {75, 80},
}
WITHOUT_SPIN = {(2,): {2, 3, 7, 49, 50, 52, 66, 73}, (2, 2): {6, 51, 75}}
"""X_BS of the layer groups that have one: Po, Vishwanath, Watanabe, Nat. Commun. 8, 50 (2017),
doi:10.1038/s41467-017-00133-2, from memory. With spin it is what Fu and Kane (PRB 76, 045302
(2007)) make of inversion, Z2, and Fang, Gilbert and Bernevig (PRB 86, 115112 (2012)) of an n-fold
axis normal to a mirror, the mirror Chern number modulo n."""


def _expected(number: int, *, spinful: bool) -> tuple[int, ...]:
    table = WITH_SPIN if spinful else WITHOUT_SPIN
    return next((orders for orders, numbers in table.items() if number in numbers), ())


def _check(number: int, *, spinful: bool) -> None:
    found = layer_groups()[number].representations(spinful=spinful)
    assert found.indicator_group == _expected(number, spinful=spinful), number
    n_columns = len(found.column_dimensions)
    assert found.smith.rank == n_columns - relation_rank(found.relations), number
    relations = np.concatenate([r.coefficients for r in found.relations])
    assert np.abs(relations @ found.matrix.T).max() < 1e-6, number


def test_the_settings_of_space_groups_hold_all_layer_groups() -> None:
    assert sorted(layer_groups()) == list(range(1, 81))


LOW = (1, 2, 3, 4, 6, 8, 11, 14, 19, 23, 27, 37)
HIGH = (49, 50, 51, 53, 55, 57, 61, 65, 66, 67, 69, 71, 73, 74, 75, 76, 77, 78, 80)
WITH_GLIDES = (7, 33, 45)


@pytest.mark.parametrize("number", [*LOW, *HIGH, *WITH_GLIDES])
def test_layer_groups_have_the_published_indicators(number: int) -> None:
    """And dim BS = dim AI, with relations that know nothing of band representations."""
    _check(number, spinful=True)


@pytest.mark.parametrize("number", [6, 17, 49])
def test_without_spin(number: int) -> None:
    _check(number, spinful=False)


@pytest.mark.endurance
@pytest.mark.parametrize("spinful", [True, False])
def test_all_eighty(spinful: bool) -> None:
    for number in layer_groups():
        _check(number, spinful=spinful)


def _witness(model: LatticeModel) -> BandRepWitness:
    case = grouped(model)
    layer = find_layer(model.crystal)
    group = GroupInUse(
        case.operators,
        "",
        len(case.operators),
        time_reversal=True,
        spinful=model.spinful,
        layer=layer,
    )
    return compute_band_rep_witness(case.bloch, group, model.crystal, model.filling)


@pytest.mark.parametrize("m", [6.0, 9.0])
def test_quantum_well_has_its_mirror_chern_number_modulo_four(m: float) -> None:
    """Bernevig, Hughes, Zhang 2006: nu = 1 for 0 < m < 8, with opposite mirror Chern numbers below
    and above 4. The one generator of Z4 is fixed up to its sign."""
    model = bhz(m=m)
    found, plain = _witness(model), _witness(bhz(m=2.0))
    assert found.indicator_group == (4,)
    counted = {}
    for name, of in (("this", model), ("plain", bhz(m=2.0))):
        (counted[name],) = (
            p.number for p in grouped(of).mirror_witness().planes if abs(p.normal_cart[2]) > 0.5
        )
    assert found.occupied.indicator is not None
    assert plain.occupied.indicator is not None
    sign = counted["plain"] * plain.occupied.indicator[0]
    assert (counted["this"] * sign - found.occupied.indicator[0]) % 4 == 0
    topological = 0 < m < 8
    assert found.occupied.z2 == (int(topological),)
    assert found.occupied.classification == (STABLE if topological else ATOMIC)


def test_graphene_with_spin_orbit_coupling() -> None:
    """Kane and Mele 2005: a quantum spin Hall insulator, |mirror Chern number| 1 modulo 6."""
    found = _witness(kane_mele())
    assert (found.dimension, found.indicator_group) == (2, (6,))
    assert found.occupied.z2 == (1,)
    assert found.occupied.indicator in ((1,), (5,))
    # with opposite levels on the two sites large, charge sits on the atoms of the lower ones
    mass = kane_mele(lambda_v=0.5)
    mass = replace(mass, crystal=replace(mass.crystal, symbols=("B", "N")))
    trivial = _witness(mass)
    assert trivial.indicator_group == (3,)  # p-6m2: no inversion, mirror Chern number modulo 3
    assert (trivial.occupied.classification, trivial.occupied.obstructed) == (ATOMIC, False)
    assert [limit.n_sites for limit in trivial.occupied.atomic_limits] == [1]


def graphene(t_one: float, *, symbols: tuple[str, str] = ("C", "C")) -> LatticeModel:
    """Spinless pz on the honeycomb, one of the three bonds -t_one eV and the others -1 eV."""
    cell = honeycomb_cell(2.46)
    positions = np.array([[1 / 3, 2 / 3, 0.5], [2 / 3, 1 / 3, 0.5]])
    terms = Terms(2)
    for r_cell, _ in bonds(cell, positions, 0, 1):
        t = t_one if r_cell == (0, 0, 0) else 1.0
        terms.add(r_cell, slice(0, 1), slice(1, 2), -t * np.eye(1))
    r_cells, h_r = terms.arrays()
    basis = build_basis([("C1", positions[0], "pz"), ("C2", positions[1], "pz")], spinful=False)
    crystal = Crystal(cell, symbols, positions, (True, True, False))
    return LatticeModel("graphene", crystal, basis, r_cells, h_r, 1, False, (0.0, 0.0, 0.5))


def test_graphene_without_spin_has_no_gap_at_k() -> None:
    """Wallace, Phys. Rev. 71, 622 (1947): the bands meet at K, a level of two bands there."""
    found = _witness(graphene(1.0))
    assert found.status == "failed"
    assert "K" in found.occupied.reason
    assert found.occupied.classification == UNRESOLVED
    (k,) = (p for p in found.points if p.name == "K")
    assert max(k.dimensions) == 2


@pytest.mark.parametrize(("t_one", "nodes"), [(1.5, True), (2.5, False)])
def test_unequal_bonds_keep_the_nodes_until_they_merge(t_one: float, nodes: bool) -> None:
    """The Dirac points of pulled graphene leave K and meet at M for t' = 2 t: Hasegawa, Konno,
    Nakano, Kohmoto, PRB 74, 033413 (2006); Montambaux et al., PRB 80, 153412 (2009) (from memory).
    With inversion alone levels at the TRIM show them. Beyond, charge sits on the strong bond."""
    model = graphene(t_one)
    case = grouped(model)
    kept = tuple(o for o in case.operators if _is_identity_or_inversion(o.rotation))
    group = GroupInUse(
        kept, "", len(kept), time_reversal=True, spinful=False, layer=find_layer(model.crystal)
    )
    found = compute_band_rep_witness(case.bloch, group, model.crystal, 1).occupied
    if nodes:
        assert found.classification == STABLE
        return
    assert (found.classification, found.obstructed) == (ATOMIC, True)
    (bond,) = found.atomic_limits
    assert bond.site == (0.5, 0.5, 0.5)


def _is_identity_or_inversion(rotation: np.ndarray) -> bool:
    return bool(np.array_equal(np.abs(rotation), np.eye(3)) and abs(np.trace(rotation)) == 3)
