"""The list of invariants that indicators allow, on groups whose list can be made by hand."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from space_group_samples import GroupSample, atomic_basis, orbit, sample_group
from topovet.arrays import IntArray
from topovet.invariants.band_reps.allowed import find_allowed
from topovet.invariants.band_reps.allowed_results import (
    AllowedInvariants,
    IndicatorValues,
    PlaneResidue,
)
from topovet.invariants.band_reps.mirror_layers import find_group_mirrors, reduce_residues
from topovet.symmetry.operators import operator_at


def _list(sample: GroupSample, values: IndicatorValues) -> AllowedInvariants:
    return find_allowed(sample.cell, sample.rotations, sample.translations, values)


def _shown(found: AllowedInvariants) -> dict[tuple[str, str], tuple[object, int | None]]:
    """Allowed values and modulus by kind and operation or plane."""
    return {
        (i.kind, i.planes[0] if i.planes else i.operation): (i.values.allowed, i.values.modulus)
        for i in found.invariants
    }


CENTRED = IndicatorValues(strong=0, weak=(0, 0, 0), z4=2, centre=(0.0, 0.0, 0.0))


def test_inversion_alone() -> None:
    """kappa = 2 is hinge states and nothing else (Khalaf et al. 2018)."""
    shown = _shown(_list(sample_group(2), CENTRED))
    assert shown == {
        ("strong index", ""): ((0,), None),
        ("weak indices", ""): (((0, 0, 0),), None),
        ("inversion invariant", "-1"): ((1,), None),
    }


def test_a_mirror_or_a_rotation_carries_kappa() -> None:
    """2/m: delta of inversion is that of the mirror plus that of the rotation."""
    found = _list(sample_group(10), CENTRED)
    kinds = [i.kind for i in found.invariants]
    assert len(found.combinations) == 2
    for combination in found.combinations:
        by_kind = dict(zip(kinds, combination, strict=True))
        (layers,), (rotation,) = (
            by_kind["layers on the mirror"].allowed,
            by_kind["rotation invariant"].allowed,
        )
        assert by_kind["layers on the mirror"].modulus == 2
        assert (layers + rotation) % 2 == 1  # type: ignore[operator]


def test_a_screw_makes_one_of_the_two_planes_zero() -> None:
    """P2_1/m: mirrors half a period apart are images of each other, C(0) = 2a, C(1/2) = 0."""
    found = _list(sample_group(11), CENTRED)
    shown = _shown(found)
    plane = next(name for kind, name in shown if kind == "mirror Chern number" and "G/2" in name)
    assert shown["mirror Chern number", plane] == ((0,), None)
    other = plane.replace("G/2", "0")
    assert shown["mirror Chern number", other] == ((0,), 2)
    assert {(*c[2].allowed, c[2].modulus) for c in found.combinations} == {(0, 4), (2, 4)}


def test_without_inversion_only_rotation_eigenvalues_speak() -> None:
    sample = sample_group(174)  # -6
    residue = PlaneResidue((0, 0, 1), False, (0.0, 0.0, 1.0), (0.0, 0.0, 0.0), 3, 2)
    shown = _shown(_list(sample, IndicatorValues(planes=(residue,))))
    assert shown["strong index", ""] == ((0, 1), None)
    assert shown["mirror Chern number", "m(0 0 1) k=0"] == ((2,), 3)
    assert shown["mirror Chern number", "m(0 0 1) k=G/2"] == ((), None)
    with_strong = _shown(
        _list(sample, IndicatorValues(strong=1, weak=(0, 0, 0), planes=(residue,)))
    )
    assert with_strong["mirror Chern number", "m(0 0 1) k=0"] == ((5,), 6)  # odd, and 2 modulo 3
    assert with_strong["mirror Chern number", "m(0 0 1) k=G/2"] == ((0,), 2)


def test_by_s4_alone() -> None:
    """Zinc blende: nu0 from S4, weak indices by the lattice, the rest open or nothing."""
    shown = _shown(_list(sample_group(216), IndicatorValues(strong=1, strong_from="S4")))
    assert shown["weak indices", ""] == (((0, 0, 0),), None)
    numbers = [value for (kind, _), value in shown.items() if kind == "mirror Chern number"]
    assert numbers == [((1,), 2)]
    assert [v for (kind, _), v in shown.items() if kind == "S4 invariant"] == [((0, 1), None)]


@pytest.mark.parametrize(("z8", "turn"), [(6, 0), (2, 1)])
def test_z8_about_the_other_mirror(z8: int, turn: int) -> None:
    """One layer on z = 1/2 and none on z = 0: seen from (0, 0, 1/2) it is the layer that counts."""
    values = IndicatorValues(
        0, (0, 0, 1), "", 0, (0.0, 0.0, 0.0), z8, (0.0, 0.0, 0.5), (0.0, 0.0, 1.0)
    )
    sample = sample_group(83)
    counted = {"m(0 0 1) k=0": 1, "m(0 0 1) k=G/2": -1}
    found = find_allowed(sample.cell, sample.rotations, sample.translations, values, counted)
    assert found.status == "ok"
    assert [i.values.allowed for i in found.invariants if i.kind == "rotation invariant"] == [
        (turn,)
    ]


def test_values_that_no_arrangement_has() -> None:
    """A weak index along a screw axis by half a period."""
    values = IndicatorValues(strong=0, weak=(0, 0, 1), z4=0, centre=(0.0, 0.0, 0.0))
    sample = sample_group(194)
    assert _list(sample, values).status == "failed"


@pytest.mark.parametrize(
    ("number", "site"),
    [(11, (0.1, 0.25, 0.2)), (51, (0, 0, 0)), (63, (0, 0.1, 0.25)), (194, (0, 0, 0))],
)
def test_numbers_that_vanish_by_symmetry(number: int, site: tuple[float, float, float]) -> None:
    """The same from matrices on Wannier functions: D_g D_m = s D_m D_g and the turned plane."""
    sample = sample_group(number)
    operators = [
        o for o in sample.operators(atomic_basis(orbit(sample, site), 0)) if not o.antiunitary
    ]
    compared = set()
    for mirror in find_group_mirrors(sample.cell, sample.rotations, sample.translations):
        for plane, vanishes in zip(mirror.planes, mirror.vanishes, strict=True):
            k = plane.k_at(np.array([[0.137, 0.291]]))
            d_m = operator_at(operators[mirror.operation], k)[0]
            opposite = False
            for g in operators:
                turn = sample.cell.T @ g.rotation @ np.linalg.inv(sample.cell.T)
                if abs(abs(float(turn @ mirror.normal @ mirror.normal)) - 1) > 1e-6:
                    continue
                d_g = operator_at(g, k)[0]
                after = operator_at(operators[mirror.operation], k @ g.k_rotation)[0] @ d_g
                sign = float(np.trace(after.conj().T @ d_g @ d_m).real) / len(d_g)
                assert abs(abs(sign) - 1) < 1e-6
                in_plane = np.linalg.det(turn) * float(turn @ mirror.normal @ mirror.normal)
                opposite |= round(sign * in_plane) == -1
            assert opposite == vanishes
            compared.add(vanishes)
    assert compared == {True, False}


def test_residues() -> None:
    assert reduce_residues([2, 6, 10, 14, 18, 22]) == ((2,), 4)
    assert reduce_residues([1, 3, 9, 11, 17, 19]) == ((1, 3), 8)
    assert reduce_residues(range(24)) == ((0,), 1)


SHEARS = st.tuples(st.permutations(range(3)), st.sampled_from([1, -1]))


def _recut(sample: GroupSample, m: IntArray) -> GroupSample:
    """The same crystal with lattice vectors m @ cell."""
    back = np.round(np.linalg.inv(m)).astype(np.int64)
    return GroupSample(
        sample.number,
        m @ sample.cell,
        back.T @ sample.rotations @ m.T,
        sample.translations @ back,
    )


@given(shears=st.lists(SHEARS, min_size=1, max_size=2))
@settings(max_examples=3)
@pytest.mark.parametrize(
    ("number", "z4", "weak", "z8"),
    [(166, 2, (1, 1, 1), None), (123, 0, (1, 1, 0), 4), (62, 2, (0, 0, 0), None)],
)
def test_the_choice_of_cell_changes_nothing(
    number: int,
    z4: int,
    weak: tuple[int, int, int],
    z8: int | None,
    shears: list[tuple[list[int], int]],
) -> None:
    m = np.eye(3, dtype=np.int64)
    for (i, j, _), step in shears:
        m[i] += step * m[j]
    sample = sample_group(number)
    values = IndicatorValues(0, weak, "", z4, (0.0, 0.0, 0.0), z8, (0.0, 0.0, 0.0), (0.0, 0.0, 1.0))
    x, y, z = (m @ np.array(weak) % 2).tolist()
    turned = IndicatorValues(
        0, (x, y, z), "", z4, (0.0, 0.0, 0.0), z8, (0.0, 0.0, 0.0), (0.0, 0.0, 1.0)
    )
    before, after = _list(sample, values), _list(_recut(sample, m), turned)
    assert before.status == after.status == "ok"
    assert [i.kind for i in before.invariants] == [i.kind for i in after.invariants]
    for a, b in zip(before.invariants, after.invariants, strict=True):
        assert a.kind == "weak indices" or a.values == b.values, a
    drop = [i.kind == "weak indices" for i in before.invariants].index(True)
    sets = [
        {tuple(v for i, v in enumerate(c) if i != drop) for c in found.combinations}
        for found in (before, after)
    ]
    assert sets[0] == sets[1]
