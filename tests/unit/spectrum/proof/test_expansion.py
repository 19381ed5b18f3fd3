"""The expansion about a box: the same spectrum, right derivatives, a remainder that bounds."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from proof_models import random_model, with_positions
from topovet.model.fourier import build_bloch_sum
from topovet.spectrum.proof.expansion import Expansion, expand, fit_positions

AXES = np.array([[0.4, 0.1, 0.0], [-0.1, 0.5, 0.2], [0.0, 0.3, 0.3]])
ORIGIN = np.array([0.1, -0.2, 0.3])


def _expansion(seed: int = 1) -> Expansion:
    model = random_model(seed, 4)
    return expand(model, build_bloch_sum(model), ORIGIN, AXES)


def _gauged(expansion: Expansion, u_0: np.ndarray, step: np.ndarray) -> np.ndarray:
    """H~ at u_0 + step by a plain sum over R, in the gauge fixed at u_0."""
    model, tau = expansion.model, fit_positions(expansion.model)
    k_0, dk = ORIGIN + u_0 @ AXES, step @ AXES
    h = sum(
        np.exp(2j * np.pi * (k_0 + dk) @ r) * block
        for r, block in zip(model.r_cells, model.h_r, strict=True)
    )
    turn = np.exp(2j * np.pi * tau @ dk)
    return np.asarray(turn.conj()[:, None] * h * turn)


def test_value_and_spectrum() -> None:
    expansion, u_0, step = _expansion(), np.array([0.3, 0.8, 0.1]), np.array([0.2, -0.1, 0.3])
    h, _, _ = expansion.derivatives(u_0[None])
    np.testing.assert_allclose(h[0], _gauged(expansion, u_0, 0 * step), atol=1e-12)
    np.testing.assert_allclose(
        np.linalg.eigvalsh(_gauged(expansion, u_0, step)),
        np.linalg.eigvalsh(expansion.derivatives((u_0 + step)[None])[0][0]),
        atol=1e-12,
    )


def test_derivatives_against_differences() -> None:
    expansion, u_0, width = _expansion(), np.array([0.3, 0.8, 0.1]), 1e-4
    _, first, second = expansion.derivatives(u_0[None])
    for pair, (a, b) in enumerate(zip(*np.triu_indices(3), strict=True)):
        e_a, e_b = np.eye(3)[a] * width, np.eye(3)[b] * width
        slope = _gauged(expansion, u_0, e_a) - _gauged(expansion, u_0, -e_a)
        np.testing.assert_allclose(first[0, a], slope / (2 * width), atol=1e-5)
        curve = (
            _gauged(expansion, u_0, e_a + e_b)
            - _gauged(expansion, u_0, e_a - e_b)
            - _gauged(expansion, u_0, e_b - e_a)
            + _gauged(expansion, u_0, -e_a - e_b)
        )
        np.testing.assert_allclose(second[0, pair], curve / (4 * width**2), atol=1e-4)


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 10_000), size=st.floats(0.003, 0.6))
def test_remainder_bounds(seed: int, size: float) -> None:
    rng = np.random.default_rng(seed)
    expansion, u_0 = _expansion(seed), rng.random(3)
    half_widths = size * rng.random(3)
    step = half_widths * rng.choice([-1, 1, 0.7], 3)
    h, first, second = (part[0] for part in expansion.derivatives(u_0[None]))
    a, b = np.triu_indices(3)
    pairs = np.where(a == b, 0.5, 1.0) * step[a] * step[b]
    model = h + np.tensordot(step, first, 1) + np.tensordot(pairs, second, 1)
    left_out = np.linalg.norm(_gauged(expansion, u_0, step) - model, ord=2)
    assert left_out <= expansion.remainder_ev(half_widths) + 1e-12


def test_remainder_is_of_third_order() -> None:
    expansion, widths = _expansion(), np.array([0.01, 0.02, 0.015])
    third = expansion.remainder_ev(widths) / expansion.remainder_ev(widths / 7)
    assert third == pytest.approx(7**3, rel=1e-6)


def test_positions_are_near_those_that_the_hopping_shows() -> None:
    """Functions at known places, hopping that decays with distance: springs of uneven strength."""
    tau = np.array([[0.1, 0.2, 0.3], [0.6, 0.3, 0.9], [2.3, -1.1, 0.5]])
    found = fit_positions(with_positions(tau))
    differences = (found - found[0]) - (tau - tau[0])
    assert np.abs(differences).max() < 0.3


def test_positions_shorten_the_derivatives() -> None:
    """The remainder is that of the places, not of the cells that the functions are listed in."""
    near = with_positions(np.array([[0.1, 0.2, 0.3], [0.6, 0.3, 0.9]]))
    far = with_positions(np.array([[0.1, 0.2, 0.3], [4.6, 0.3, 0.9]]))
    width = np.full(3, 0.05)
    remainders = [
        expand(m, build_bloch_sum(m), ORIGIN, AXES).remainder_ev(width) for m in (near, far)
    ]
    assert remainders[1] == pytest.approx(remainders[0], rel=1e-4)


def test_rounding_allowance_is_small_and_not_nothing() -> None:
    assert 1e-13 < _expansion().rounding_ev < 1e-8
