from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from spgrep import (
    get_spacegroup_irreps_from_primitive_symmetry,
    get_spacegroup_spinor_irreps_from_primitive_symmetry,
)

from space_group_samples import GroupSample, sample_group
from topovet.symmetry.irreps import Irrep, IrrepError, compute_irreps
from topovet.symmetry.little_group import LittleGroup, OperationList, find_little_group
from topovet.symmetry.operators import cartesian_rotation, spin_rotation
from topovet.symmetry.special_points import find_special_points

SYMMORPHIC = (1, 10, 25, 83, 121, 139, 156, 166, 187, 216, 225)
NONSYMMORPHIC = (4, 14, 19, 62, 73, 110, 130, 152, 161, 194, 198, 205, 227)


def _at_special_points(
    sample: GroupSample, *, spinful: bool
) -> list[tuple[LittleGroup, tuple[Irrep, ...]]]:
    operations = sample.operations(spinful=spinful)
    groups = [
        find_little_group(operations, point.k_frac)
        for point in find_special_points(sample.crystal, operations)
    ]
    return [(group, compute_irreps(group)) for group in groups]


@pytest.mark.parametrize("number", SYMMORPHIC + NONSYMMORPHIC)
@pytest.mark.parametrize("spinful", [True, False])
def test_irreps_are_orthogonal_and_complete(number: int, spinful: bool) -> None:
    """Great orthogonality theorem: n/d for each pair of equal elements, 0 between irreps."""
    for group, irreps in _at_special_points(sample_group(number), spinful=spinful):
        n = len(group.members)
        assert sum(i.dimension**2 for i in irreps) == n
        for i in irreps:
            made = i.matrices[:, None] @ i.matrices[None]
            expected = group.factors[..., None, None] * i.matrices[group.product]
            np.testing.assert_allclose(made, expected, atol=1e-8)
            for j in irreps:
                overlap = np.einsum("gab,gcd->abcd", i.matrices.conj(), j.matrices)
                expected = np.zeros_like(overlap)
                if i is j:
                    unit = np.eye(i.dimension)
                    expected = np.einsum("ac,bd->abcd", unit, unit) * n / i.dimension
                np.testing.assert_allclose(overlap, expected, atol=1e-7)


@pytest.mark.parametrize("number", SYMMORPHIC + NONSYMMORPHIC)
@pytest.mark.parametrize("spinful", [True, False])
def test_dimensions_and_characters_equal_those_of_spgrep(number: int, spinful: bool) -> None:
    """An independent program; only its sign of each SU(2) matrix has to be carried over."""
    sample = sample_group(number)
    for group, irreps in _at_special_points(sample, spinful=spinful):
        theirs, members = _spgrep_characters(sample, group, spinful=spinful)
        np.testing.assert_array_equal(np.sort(members), group.members)
        ours = np.array([i.characters for i in irreps])
        overlap = np.abs(ours.conj() @ theirs[:, np.argsort(members)].T) / len(members)
        assert overlap.shape[0] == overlap.shape[1]
        np.testing.assert_allclose(np.sort(overlap, axis=1)[:, -1], 1, atol=1e-6)
        np.testing.assert_allclose(overlap.sum(axis=0), 1, atol=1e-6)
        matched = theirs[overlap.argmax(axis=1)][:, np.argsort(members)]
        np.testing.assert_allclose(matched, ours, atol=1e-6)


def _spgrep_characters(
    sample: GroupSample, group: LittleGroup, *, spinful: bool
) -> tuple[np.ndarray, np.ndarray]:
    """(n_irrep, n) characters in spgrep's order of the members, in our sign of spin."""
    arguments = {"rotations": sample.rotations, "translations": sample.translations}
    arguments |= {"kpoint": group.k_frac, "method": "random"}
    if not spinful:
        irreps, members = get_spacegroup_irreps_from_primitive_symmetry(**arguments)
        return np.array([np.trace(i, axis1=1, axis2=2) for i in irreps]), members
    irreps, _, spins, members = get_spacegroup_spinor_irreps_from_primitive_symmetry(
        lattice=sample.cell, **arguments
    )
    ours = np.array(
        [spin_rotation(cartesian_rotation(w, sample.cell)) for w in sample.rotations[members]]
    )
    signs = np.round(np.einsum("gij,gij->g", ours.conj(), spins).real / 2)
    return np.array([np.trace(i, axis1=1, axis2=2) * signs for i in irreps]), members


def test_double_group_of_the_cube() -> None:
    """Oh at Γ: Γ6±, Γ7± of dimension 2, Γ8± of 4 (Koster et al. 1963); time reversal adds none."""
    operations = sample_group(225).operations(spinful=True)
    irreps = compute_irreps(find_little_group(operations, np.zeros(3)))
    assert [i.dimension for i in irreps] == [2, 2, 2, 2, 4, 4]
    assert {i.time_reversal for i in irreps} == {"real"}


@pytest.mark.parametrize("spinful", [True, False])
def test_kramers(spinful: bool) -> None:
    """With inversion alone: spinful levels at a TRIM are doubled, spinless ones are not."""
    operations = sample_group(2).operations(spinful=spinful)
    irreps = compute_irreps(find_little_group(operations, np.array([0.5, 0.0, 0.5])))
    assert [i.dimension for i in irreps] == [1, 1]
    assert [i.time_reversal for i in irreps] == (["doubled"] * 2 if spinful else ["real"] * 2)
    assert [i.level_dimension for i in irreps] == ([2, 2] if spinful else [1, 1])


def test_time_reversal_pairs_conjugate_irreps() -> None:
    """C3v double group: the two one-dimensional irreps are conjugate (mirror ±i) and join."""
    operations = sample_group(156).operations(spinful=True)
    irreps = compute_irreps(find_little_group(operations, np.zeros(3)))
    assert [i.time_reversal for i in irreps] == ["paired", "paired", "real"]
    assert [i.partner for i in irreps] == [1, 0, 2]


def test_a_screw_axis_sticks_bands_together() -> None:
    """P2_1 with time reversal, spinless, k along the screw at 1/2: all levels twofold (Herring)."""
    operations = sample_group(4).operations(spinful=False)
    irreps = compute_irreps(find_little_group(operations, np.array([0.0, 0.5, 0.0])))
    assert [i.level_dimension for i in irreps] == [2, 2]
    at_gamma = compute_irreps(find_little_group(operations, np.zeros(3)))
    assert [i.level_dimension for i in at_gamma] == [1, 1]


def test_eightfold_levels_of_130() -> None:
    """P4/ncc with spin and time reversal: every level at A is eightfold.

    Wieder, Kim, Rappe, Kane, Phys. Rev. Lett. 116, 186402 (2016); Bradlyn et al., Science 353,
    aaf5037 (2016), doi:10.1126/science.aaf5037 (groups 130 and 135 have one 8-fold
    representation at A; from memory).
    """
    operations = sample_group(130).operations(spinful=True)
    irreps = compute_irreps(find_little_group(operations, np.array([0.5, 0.5, 0.5])))
    assert {i.level_dimension for i in irreps} == {8}


def test_sixfold_levels_of_198() -> None:
    """P2_13 with spin and time reversal: levels of 2 and 4 bands at Γ, of 2 and 6 at R.

    Bradlyn et al., Science 353, aaf5037 (2016), doi:10.1126/science.aaf5037 (from memory).
    """
    operations = sample_group(198).operations(spinful=True)
    at_r = compute_irreps(find_little_group(operations, np.array([0.5, 0.5, 0.5])))
    assert {i.level_dimension for i in at_r} == {2, 6}
    at_gamma = compute_irreps(find_little_group(operations, np.zeros(3)))
    assert {i.level_dimension for i in at_gamma} == {2, 4}


def test_wrong_factors_are_refused() -> None:
    group = find_little_group(sample_group(216).operations(spinful=True), np.zeros(3))
    factors = np.array(group.factors)
    factors[3, 5] *= -1
    with pytest.raises(IrrepError):
        compute_irreps(replace(group, factors=factors))


def test_centring_translations_in_the_cell() -> None:
    """In a doubled cell the operations hold a pure translation; its characters are ±1 at Γ."""
    operations = OperationList(
        cell=np.diag([3.0, 4.0, 10.0]),
        rotations=np.array([np.eye(3)] * 2, dtype=np.int64),
        translations=np.array([[0.0, 0, 0], [0, 0, 0.5]]),
        antiunitary=np.array([False, False]),
        spinful=True,
    )
    irreps = compute_irreps(find_little_group(operations, np.zeros(3)))
    assert sorted(i.characters[1].real for i in irreps) == pytest.approx([-1, 1])
