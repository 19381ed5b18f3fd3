from __future__ import annotations

import numpy as np
import pytest

from space_group_samples import GroupSample, sample_group
from topovet.errors import NoInversionError
from topovet.symmetry.irrep_names import (
    IrrepName,
    main_rotation,
    name_irreps,
    point_group_phases,
    rotation_axis,
)
from topovet.symmetry.irreps import compute_irreps
from topovet.symmetry.little_group import OperationList, find_little_group
from topovet.symmetry.special_points import find_special_points
from topovet.symmetry.textbook_names import operation_kinds, point_group_symbol


def _names(
    sample: GroupSample,
    k: tuple[float, float, float],
    *,
    spinful: bool,
    centre: tuple[float, float, float] | None = None,
    operations: OperationList | None = None,
) -> tuple[IrrepName, ...]:
    operations = operations or sample.operations(spinful=spinful)
    group = find_little_group(operations, np.array(k))
    at = None if centre is None else np.array(centre)
    return name_irreps(group, compute_irreps(group), "Γ" if not any(k) else "Y", at)


def _point(sample: GroupSample, name: str) -> tuple[float, float, float]:
    """Coordinates of a special point in the cell of the sample."""
    points = find_special_points(sample.crystal, sample.operations(spinful=True))
    x, y, z = next(p for p in points if p.name == name).k_frac.tolist()
    return x, y, z


DOUBLE = {
    221: {"Γ6+", "Γ6−", "Γ7+", "Γ7−", "Γ8+", "Γ8−"},
    207: {"Γ6", "Γ7", "Γ8"},
    216: {"Γ6", "Γ7", "Γ8"},
    123: {"Γ6+", "Γ6−", "Γ7+", "Γ7−"},
    111: {"Γ6", "Γ7"},
    115: {"Γ6", "Γ7"},
    99: {"Γ6", "Γ7"},
    89: {"Γ6", "Γ7"},
    191: {"Γ7+", "Γ7−", "Γ8+", "Γ8−", "Γ9+", "Γ9−"},
    187: {"Γ7", "Γ8", "Γ9"},
    183: {"Γ7", "Γ8", "Γ9"},
    177: {"Γ7", "Γ8", "Γ9"},
    166: {"Γ4,5+", "Γ4,5−", "Γ6+", "Γ6−"},
    160: {"Γ4,5", "Γ6"},
    155: {"Γ4,5", "Γ6"},
    47: {"Γ5+", "Γ5−"},
    25: {"Γ5"},
    16: {"Γ5"},
    10: {"Γ3,4+", "Γ3,4−"},
    2: {"Γ2+", "Γ2−"},
}
"""Space group -> double-valued irreps at Γ, by Koster et al.; trigonal ones by Elliott."""


@pytest.mark.parametrize("number", DOUBLE)
def test_double_groups_at_gamma(number: int) -> None:
    names = _names(sample_group(number), (0, 0, 0), spinful=True)
    assert {name.textbook for name in names} == DOUBLE[number]
    assert len({name.label for name in names}) == len(names)


def test_spin_one_half_is_gamma_6_in_cubic_groups() -> None:
    """Γ6 is the spinor itself, j = ±1/2 about C4; Γ7 has ±3/2, Γ8 all four."""
    names = {n.textbook: n for n in _names(sample_group(221), (0, 0, 0), spinful=True)}
    assert names["Γ6+"].rotation_numbers == (0.5, -0.5)
    assert names["Γ7+"].rotation_numbers == (1.5, -1.5)
    assert names["Γ8−"].rotation_numbers == (1.5, 0.5, -0.5, -1.5)
    assert {n.rotation for n in names.values()} == {"C4"}
    assert [names[t].label for t in ("Γ6+", "Γ7+", "Γ8−")] == ["Γ2a+", "Γ2b+", "Γ4−"]


def test_single_group_of_the_cube_has_the_names_of_1936() -> None:
    """Bouckaert, Smoluchowski, Wigner: p is Γ15, d splits into Γ12 and Γ25′ (xy, yz, zx)."""
    names = {n.textbook: n for n in _names(sample_group(221), (0, 0, 0), spinful=False)}
    assert {n for n in names if n is not None} == {
        *("Γ1", "Γ2", "Γ12", "Γ15′", "Γ25′"),
        *("Γ1′", "Γ2′", "Γ12′", "Γ15", "Γ25"),
    }
    assert names["Γ15"].parity == -1
    assert names["Γ25′"].parity == 1
    # px, py, pz under C4: j = 0, ±1; xy, yz, zx: xy changes sign (j = 2), the others ±1
    assert names["Γ15"].rotation_numbers == (1.0, 0.0, -1.0)
    assert names["Γ25′"].rotation_numbers == (2.0, 1.0, -1.0)


def test_names_do_not_depend_on_the_origin() -> None:
    """A structure moved by a vector: the textbook's names at Γ and at the zone boundary stay."""
    sample, moved = sample_group(216), np.array([0.13, 0.27, 0.41])
    operations = sample.operations(spinful=True)
    # x' = W x + w about a new origin: w + moved - W moved
    translations = operations.translations + moved - operations.rotations @ moved
    other = OperationList(
        operations.cell, operations.rotations, translations, operations.antiunitary, True
    )
    for name in ("Γ", "L", "X"):
        k = _point(sample, name)
        one = _names(sample, k, spinful=True)
        two = _names(sample, k, spinful=True, operations=other)
        assert {n.textbook for n in one} == {n.textbook for n in two}
        assert None not in {n.textbook for n in one}


def test_parity_follows_the_centre() -> None:
    """Rock salt at L: cation and anion, both centres on the axis, give opposite parities."""
    sample = sample_group(225)
    k = _point(sample, "L")
    anion = np.array([3.0, 3.0, 3.0]) @ np.linalg.inv(sample.cell)  # half the cube of 6 angstrom
    at_cation = _names(sample, k, spinful=True, centre=(0, 0, 0))
    at_anion = _names(sample, k, spinful=True, centre=(anion[0], anion[1], anion[2]))
    assert [n.parity for n in at_cation] == [-n.parity for n in at_anion if n.parity]
    assert {n.textbook for n in at_cation} == {"Y4,5+", "Y4,5−", "Y6+", "Y6−"}
    for one, other in zip(at_cation, at_anion, strict=True):
        assert one.textbook is not None
        assert other.textbook is not None
        assert one.textbook[:-1] == other.textbook[:-1]
        assert one.textbook[-1] != other.textbook[-1]
    with pytest.raises(NoInversionError, match="no inversion about"):
        _names(sample, k, spinful=True, centre=(0.1, 0, 0))


def test_diamond_at_x_has_no_point_group_name() -> None:
    """Essential glides: one 4-fold irrep (X5 of Elliott 1954) with states of both parities."""
    sample = sample_group(227)
    names = _names(sample, _point(sample, "X"), spinful=True)
    assert [(n.dimension, n.parity, n.textbook) for n in names] == [(4, 0, None)]
    assert names[0].label == "Y4±"
    group = find_little_group(sample.operations(spinful=True), np.array(_point(sample, "X")))
    assert point_group_phases(group) is None


def test_diamond_at_l_is_named_about_the_bond_on_its_axis() -> None:
    """At each of the four L there is an origin without screws, the middle of the bond along k."""
    sample = sample_group(227)
    operations = sample.operations(spinful=True)
    points = find_special_points(sample.crystal, operations)
    for k in next(p for p in points if p.name == "L").star:
        names = _names(sample, (k[0], k[1], k[2]), spinful=True)
        assert {n.textbook for n in names} == {"Y4,5+", "Y4,5−", "Y6+", "Y6−"}


def test_levels_of_a_pair_have_both_letters() -> None:
    names = _names(sample_group(166), (0, 0, 0), spinful=True)
    pairs = {n.level_label for n in names if n.time_reversal == "paired"}
    assert pairs == {"Γ1ab+", "Γ1ab−"}
    magnetic = sample_group(166).operations(spinful=True, time_reversal=False)
    alone = _names(sample_group(166), (0, 0, 0), spinful=True, operations=magnetic)
    assert {n.level_label for n in alone} == {n.label for n in alone}


def test_rotoinversions_lead_only_without_inversion() -> None:
    for number, symbol in ((81, "S4"), (174, "S3"), (147, "C3"), (83, "C4"), (6, "m"), (111, "S4")):
        names = _names(sample_group(number), (0, 0, 0), spinful=True)
        assert {n.rotation for n in names} == {symbol}, number
    bare = find_little_group(sample_group(1).operations(spinful=True), np.zeros(3))
    assert main_rotation(bare) is None


def test_axes_have_one_sign() -> None:
    quarter = np.array([[0.0, -1, 0], [1, 0, 0], [0, 0, 1]])
    np.testing.assert_allclose(rotation_axis(quarter), [0, 0, 1], atol=1e-12)
    np.testing.assert_allclose(rotation_axis(quarter.T), [0, 0, -1], atol=1e-12)
    np.testing.assert_allclose(rotation_axis(-quarter @ quarter), [0, 0, 1], atol=1e-12)
    np.testing.assert_array_equal(rotation_axis(-np.eye(3)), np.zeros(3))


def test_kinds_and_point_groups() -> None:
    rotations = sample_group(141).rotations
    assert operation_kinds(rotations).count("-4") == 2
    assert point_group_symbol(rotations) == "4/mmm"
    assert point_group_symbol(sample_group(200).rotations) is None
