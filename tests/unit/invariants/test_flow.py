"""Counting how centres flow, on flows drawn by hand."""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pytest

from topovet.arrays import FloatArray
from topovet.invariants.flow import (
    closest_steps,
    crossings,
    distance_to_set,
    kramers_splitting,
    largest_gap_parity,
    largest_gaps,
    steps_of_flux,
)


def drawn(*paths: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Sorted centres modulo 1 of each line, and the flux between lines, of unwrapped paths."""
    lifted = np.stack(paths, axis=1)
    return np.sort(lifted % 1.0, axis=1), np.diff(lifted.sum(axis=1))


X = np.linspace(0, 1, 41)
FLOWS = {
    "partners change": (drawn(0.02 + 0.46 * X, -0.02 - 0.46 * X), 1),
    "partners return": (drawn(0.3 * np.sin(np.pi * X), -0.3 * np.sin(np.pi * X)), 0),
    "full turn and back": (drawn(0.1 + X, 0.1 - X), 0),
    "one of two pairs changes": (drawn(0.5 * X, -0.5 * X, 0.3 + 0 * X, 0.3 + 0.1 * X * (1 - X)), 1),
    "both pairs change": (drawn(0.5 * X, -0.5 * X, 0.25 + 0.5 * X, 0.25 - 0.5 * X), 0),
    "a single centre goes round": (drawn(X, 0.5 + 0.1 * np.sin(np.pi * X)), 1),
}


def test_largest_gap_may_lie_across_zero() -> None:
    middle, width = largest_gaps(np.array([[0.2, 0.5, 0.6], [0.1, 0.2, 0.9]]))
    np.testing.assert_allclose(middle, [0.9, 0.55])
    np.testing.assert_allclose(width, [0.6, 0.7])


@pytest.mark.parametrize("name", FLOWS)
def test_both_rules_count_the_same(name: str) -> None:
    (hwcc, flux), expected = FLOWS[name]
    assert largest_gap_parity(hwcc) == expected
    references = np.array([0.03, 0.21, 0.41, 0.77])
    counts = crossings(hwcc[:-1], steps_of_flux(hwcc[:-1], hwcc[1:], flux), references)
    assert set((counts % 2).tolist()) == {expected}


@pytest.mark.parametrize("name", FLOWS)
def test_counts_do_not_depend_on_the_origin(name: str) -> None:
    (hwcc, _), expected = FLOWS[name]
    for shift in np.linspace(0, 1, 23):
        assert largest_gap_parity(np.sort((hwcc + shift) % 1.0, axis=1)) == expected


def test_steps_follow_the_flux_not_the_closest_match() -> None:
    """One centre darts across the gap: the closest match moves all others up a little instead."""
    first = np.array([[0.031, 0.075, 0.836, 0.989]])
    second = np.array([[0.016, 0.064, 0.271, 0.988]])
    assert np.abs(closest_steps(first, second)).max() < 0.2
    darting = steps_of_flux(first, second, np.array([0.271 - 0.836 - 0.027]))
    np.testing.assert_allclose(darting, [[-0.015, -0.011, -0.565, -0.001]], atol=1e-12)
    creeping = steps_of_flux(first, second, np.array([1 + 0.271 - 0.836 - 0.027]))
    np.testing.assert_allclose(creeping, closest_steps(first, second))


def test_closest_steps_against_all_assignments() -> None:
    rng = np.random.default_rng(5)
    for _ in range(50):
        first, second = np.sort(rng.random((2, 4)), axis=1)
        best = min(
            np.abs((second[list(order)] - first + 0.5) % 1.0 - 0.5).max()
            for order in permutations(range(4))
        )
        found = np.abs(closest_steps(first[None], second[None])).max()
        assert found == pytest.approx(best, abs=1e-12)


def test_kramers_pairs_may_straddle_zero() -> None:
    assert kramers_splitting(np.array([0.01, 0.4, 0.41, 0.995])) == pytest.approx(0.015)
    assert kramers_splitting(np.array([0.1, 0.11, 0.4, 0.42])) == pytest.approx(0.02)


def test_distance_is_taken_around_the_circle() -> None:
    found = distance_to_set(np.array([0.99, 0.3]), np.array([0.02, 0.5]))
    np.testing.assert_allclose(found, [0.03, 0.2])
