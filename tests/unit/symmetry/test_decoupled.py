"""Involutions out of one or several solutions."""

from __future__ import annotations

import numpy as np

from inverted_models import random_unitary
from topovet.arrays import ComplexArray
from topovet.symmetry.decoupled import involution, matrix_sign, polar, sign_alternatives


def _involution(rng: np.random.Generator, n: int) -> ComplexArray:
    u = random_unitary(rng, n)
    signs = np.where(np.arange(n) % 2, 1.0, -1.0)
    return np.asarray((u * signs) @ u.conj().T)


def test_phase_and_scale_of_a_solution_do_not_matter() -> None:
    rng = np.random.default_rng(0)
    p = _involution(rng, 6)
    for phase in (0.1, 1.0, 1.5, 2.5):
        found, purity = involution((0.3 * np.exp(1j * phase) * p)[None])
        assert purity > 1 - 1e-9
        sign = np.sign(np.vdot(p, found).real)
        np.testing.assert_allclose(sign * found, p, atol=1e-12)


def test_matrix_that_is_no_involution_has_low_purity() -> None:
    cube_roots = np.diag(np.exp(2j * np.pi * np.arange(3) / 3))
    assert involution(cube_roots[None])[1] < 0.8


def test_solution_that_leaves_functions_out_has_no_purity() -> None:
    assert involution(np.diag([1.0, -1.0, 0.0])[None].astype(complex))[1] == 0.0


def test_several_solutions_are_combined_and_told_apart() -> None:
    """Three decoupled sets: whatever mixtures are handed over, P and its two flips come back."""
    for seed in range(5):
        _check_three_sets(np.random.default_rng(seed))


def _check_three_sets(rng: np.random.Generator) -> None:
    parts = [_involution(rng, n) for n in (4, 2, 2)]
    blocks = np.zeros((3, 8, 8), dtype=complex)
    start = 0
    for i, part in enumerate(parts):
        blocks[i, start : start + len(part), start : start + len(part)] = part
        start += len(part)
    mixed = np.tensordot(random_unitary(rng, 3), blocks, axes=1)
    found, purity = involution(mixed)
    assert purity > 1 - 1e-9
    np.testing.assert_allclose(found @ found, np.eye(8), atol=1e-10)
    flips = sign_alternatives(found, mixed)
    assert len(flips) == 2
    for flip in flips:
        np.testing.assert_allclose(flip @ flip, np.eye(8), atol=1e-10)
        same = flip @ found  # +1 on the sets that stay, -1 on the one that is flipped
        np.testing.assert_allclose(same, np.diag(np.round(np.diag(same).real)), atol=1e-9)
        assert int((np.diag(same).real < 0).sum()) == 2


def test_two_sets_that_inversion_exchanges_leave_no_sign() -> None:
    """Then the other signs are the same operator in another gauge."""
    swap = np.array([[0, 1], [1, 0]], dtype=complex)
    vectors = np.array([[[0, 1], [0, 0]], [[0, 0], [1, 0]]], dtype=complex)
    assert sign_alternatives(swap, vectors) == []


def test_polar_and_sign_of_a_matrix() -> None:
    rng = np.random.default_rng(2)
    u = random_unitary(rng, 4)
    stretch = u.conj().T @ np.diag([0.5, 1, 2, 3]) @ u
    np.testing.assert_allclose(polar(u @ stretch), u, atol=1e-12)
    hermitian = (u * [-2, -0.1, 0.2, 5]) @ u.conj().T
    np.testing.assert_allclose(
        matrix_sign(hermitian), (u * [-1, -1, 1, 1]) @ u.conj().T, atol=1e-12
    )
