from __future__ import annotations

import numpy as np
import pytest

from space_group_samples import atomic_basis, orbit, sample_group
from topovet.symmetry.little_group import (
    NotAGroupError,
    OperationList,
    find_little_group,
    list_operations,
    same_point,
    star_of,
)
from topovet.symmetry.operators import operator_at

NUMBERS = (2, 14, 62, 110, 136, 152, 161, 166, 176, 194, 198, 205, 216, 221, 227, 230)


def _k(numbers: tuple[float, float, float]) -> np.ndarray:
    return np.array(numbers)


@pytest.mark.parametrize("number", NUMBERS)
@pytest.mark.parametrize("spinful", [True, False])
def test_factors_are_a_cocycle(number: int, spinful: bool) -> None:
    """omega(a,b) omega(ab,c) = omega(a,bc) omega(b,c): products of matrices are associative."""
    for k in ((0.5, 0.5, 0.5), (0.5, 0.0, 0.0), (1 / 3, 1 / 3, 0.5), (0.25, 0.25, 0.25)):
        group = find_little_group(sample_group(number).operations(spinful=spinful), _k(k))
        p, f = group.product, group.factors
        left = f[:, :, None] * f[p]
        right = f[:, p] * f[None, :, :]
        np.testing.assert_allclose(left, right, atol=1e-9)


@pytest.mark.parametrize("number", [62, 136, 161, 194, 198, 227])
def test_wannier_matrices_multiply_with_these_factors(number: int) -> None:
    """Factors come from the operations alone, matrices on Wannier functions from the basis."""
    sample = sample_group(number)
    basis = atomic_basis(orbit(sample, (0.0, 0.0, 0.0)), 1)
    operators = sample.operators(basis)
    operations = list_operations(operators, sample.cell, spinful=True)
    for k in ((0.0, 0.0, 0.0), (0.5, 0.5, 0.5), (0.5, 0.0, 0.0), (0.5, 0.25, 0.75)):
        group = find_little_group(operations, _k(k))
        d = np.array([operator_at(operators[i], _k(k)[None])[0] for i in group.members])
        expected = group.factors[..., None, None] * d[group.product]
        np.testing.assert_allclose(d[:, None] @ d[None], expected, atol=1e-9)
        if not len(group.reversing):
            continue
        a = np.array([operator_at(operators[i], _k(k)[None])[0] for i in group.reversing])
        squares = group.square_factors[:, None, None] * d[group.squares]
        np.testing.assert_allclose(a @ a.conj(), squares, atol=1e-9)
        back = (a[0].conj().T @ d @ a[0]).conj()  # (A K)^-1 h (A K)
        turned = group.conjugate_factors[:, None, None] * d[group.conjugate]
        np.testing.assert_allclose(back, turned, atol=1e-9)


def test_little_groups_of_the_face_centred_lattice() -> None:
    """Orders of the little co-groups and stars of Oh crystals at Γ, X, L, W: 48, 16, 12, 8."""
    operations = sample_group(225).operations(spinful=True, time_reversal=False)
    # face-centred primitive cell of the sample, points found by their Cartesian coordinates
    reciprocal = np.linalg.inv(sample_group(225).cell).T * 6.0
    for cartesian, order in (((0, 0, 0), 48), ((0, 0, 1), 16), ((0.5, 0.5, 0.5), 12)):
        k = np.array(cartesian) @ np.linalg.inv(reciprocal)
        group = find_little_group(operations, k)
        assert (len(group.members), len(group.star)) == (order, 48 // order)
    w = np.array([0.5, 0.0, 1.0]) @ np.linalg.inv(reciprocal)
    assert len(find_little_group(operations, w).members) == 8


@pytest.mark.parametrize("number", [2, 62, 166, 227])
def test_star_and_little_group_share_the_order(number: int) -> None:
    operations = sample_group(number).operations(spinful=False, time_reversal=False)
    for k in ((0.5, 0.0, 0.0), (0.5, 0.5, 0.5), (0.1, 0.1, 0.1), (0.11, 0.23, 0.37)):
        group = find_little_group(operations, _k(k))
        assert len(group.members) * len(group.star) == len(operations.rotations)
        assert same_point(group.star[0], _k(k))


def test_the_star_is_counted_modulo_reciprocal_vectors() -> None:
    operations = sample_group(2).operations(spinful=False)
    assert len(star_of(operations, _k((0.5, 0.5, -0.5)))) == 1
    np.testing.assert_array_equal(star_of(operations, _k((0.75, 1.0, -1.0)))[0], [-0.25, 0, 0])
    np.testing.assert_array_equal(star_of(operations, _k((-0.5, 0.5, 0)))[0], [0.5, 0.5, 0])


def test_equivalent_k_give_the_same_factors() -> None:
    operations = sample_group(227).operations(spinful=True)
    one = find_little_group(operations, _k((0.5, 0.0, 0.5)))
    other = find_little_group(operations, _k((-0.5, 2.0, 1.5)))
    np.testing.assert_array_equal(one.members, other.members)
    np.testing.assert_allclose(one.factors, other.factors, atol=1e-9)


def test_incomplete_operations_are_refused() -> None:
    whole = sample_group(216).operations(spinful=True, time_reversal=False)
    part = OperationList(
        whole.cell, whole.rotations[:7], whole.translations[:7], whole.antiunitary[:7], True
    )
    with pytest.raises(NotAGroupError, match="not closed"):
        find_little_group(part, np.zeros(3))
