"""Bounds of boxes: never above what is met inside, and close to it for small boxes."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from proof_models import plain_energies, random_model
from topovet.model.fourier import build_bloch_sum
from topovet.spectrum.descent import Objective
from topovet.spectrum.proof.block_bound import _upper_size, bound_boxes
from topovet.spectrum.proof.expansion import expand

ORIGIN = np.array([0.2, 0.1, -0.3])
AXES = np.array([[0.5, 0.1, 0.0], [-0.1, 0.5, 0.2], [0.0, 0.3, 0.4]])
OBJECTIVES = {"direct": (1, -1), "conduction": (1, 0), "valence": (0, -1)}


@pytest.mark.parametrize("quantity", OBJECTIVES)
@settings(max_examples=60, deadline=None)
@given(
    seed=st.integers(0, 100_000),
    filling=st.integers(1, 4),
    size=st.floats(1e-3, 0.3),
    level=st.sampled_from([0.0, 1.0, 5.0]),
)
def test_nothing_in_the_box_is_below(
    quantity: str, seed: int, filling: int, size: float, level: float
) -> None:
    rng = np.random.default_rng(seed)
    model = random_model(seed, 5, level_ev=level)
    expansion = expand(model, build_bloch_sum(model), ORIGIN, AXES)
    objective = Objective(filling, *OBJECTIVES[quantity])
    centre, half = rng.random((1, 3)), size * rng.random((1, 3))
    remainder = np.array([expansion.remainder_ev(half[0])])
    found = bound_boxes(expansion, objective, centre, half, remainder)
    steps = rng.uniform(-1, 1, (40, 3))
    steps[:20] = np.sign(steps[:20])  # corners, edges and faces hold the extremes
    steps[10:20, rng.integers(3)] = 0.3
    met = objective.of(plain_energies(model, ORIGIN + (centre + half * steps) @ AXES))
    assert met.min() >= found.lower[0] - 1e-12
    assert found.losses.sum() == pytest.approx(found.values[0] - found.lower[0], rel=1e-6)


def test_small_boxes_are_bounded_closely() -> None:
    model = random_model(3, 5, level_ev=4.0)
    expansion = expand(model, build_bloch_sum(model), ORIGIN, AXES)
    centre, losses = np.array([[0.4, 0.3, 0.6]]), []
    for half in (1e-2, 1e-3, 1e-4):
        widths = np.full((1, 3), half)
        remainder = np.array([expansion.remainder_ev(widths[0])])
        found = bound_boxes(expansion, Objective(2, 1, -1), centre, widths, remainder)
        losses.append(float(found.values[0] - found.lower[0]))
    assert losses[1] < 0.12 * losses[0]
    assert losses[2] < 0.12 * losses[1]


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 100_000), n=st.integers(1, 6))
def test_quick_size_is_above_the_modulus(seed: int, n: int) -> None:
    c = np.random.default_rng(seed).normal(size=(3, n, n, 2)) @ np.array([1, 1j])
    c = c + c.conj().swapaxes(1, 2)
    values, vectors = np.linalg.eigh(c)
    modulus = (vectors * np.abs(values)[:, None, :]) @ vectors.conj().swapaxes(1, 2)
    difference = _upper_size(c, slice(max(0, n - 2), n)) - modulus
    assert np.linalg.eigvalsh(difference).min() > -1e-9
