"""Spectral flow of unitaries whose phases are known."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from topovet.boundary.flow import (
    largest_moves,
    reference_angle,
    rising_levels,
    surface_phases,
)


def _unitary(rng, n):
    q, _ = np.linalg.qr(rng.normal(size=(n, n)) + 1j * rng.normal(size=(n, n)))
    return q


def test_a_level_that_rises_through_the_curve_counts_plus_one() -> None:
    """A = E - eps = -x for a level at x: from below, A > 0, to above, A < 0."""
    before, after = (surface_phases(np.array([[[-x + 0j]]]), 1.0) for x in (-0.1, 0.1))
    reference, room = reference_angle(before.phases[0])
    assert largest_moves(before.unitary, after.unitary)[0] < room
    assert rising_levels(before.phases[0], after.phases[0], reference) == 1
    assert rising_levels(after.phases[0], before.phases[0], reference) == -1


def test_passing_infinity_does_not_count() -> None:
    before, after = (surface_phases(np.array([[[a + 0j]]]), 1.0) for a in (30.0, -30.0))
    reference, room = reference_angle(before.phases[0])
    assert largest_moves(before.unitary, after.unitary)[0] < room
    assert rising_levels(before.phases[0], after.phases[0], reference) == 0


@settings(max_examples=15, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(1, 6))
def test_flow_along_a_path_equals_the_known_turns(seed: int, n: int) -> None:
    """Phases theta_i(t) turn by known amounts while the eigenvectors turn too."""
    rng = np.random.default_rng(seed)
    start = rng.uniform(0.05, 2 * np.pi - 0.05, n)
    turn = rng.uniform(-12, 12, n)
    frame = _unitary(rng, n)
    generator = rng.normal(size=(n, n)) + 1j * rng.normal(size=(n, n))
    values, vectors = np.linalg.eigh(generator + generator.conj().T)
    steps, net, last = 600, 0, None
    for t in np.linspace(0, 1, steps + 1):
        rotation = (vectors * np.exp(1j * t * values)) @ vectors.conj().T @ frame
        angles = start + t * turn
        # A = gamma cot(theta / 2) has the Cayley phase theta
        a = (rotation / np.tan(angles / 2)) @ rotation.conj().T
        point = surface_phases(a[None], 1.0)
        assert np.sort(angles % (2 * np.pi)) == pytest.approx(point.phases[0], abs=1e-6)
        if last is not None:
            reference, room = reference_angle(last.phases[0])
            assume(largest_moves(last.unitary, point.unitary)[0] < room)  # else it were refined
            net += rising_levels(last.phases[0], point.phases[0], reference)
        last = point
    passed = np.floor((start + turn - np.pi) / (2 * np.pi)) - np.floor(
        (start - np.pi) / (2 * np.pi)
    )
    assert net == passed.sum()


def test_moves_bound_the_phases() -> None:
    rng = np.random.default_rng(1)
    for _ in range(20):
        w, step = _unitary(rng, 6), rng.normal(size=(6, 6)) + 1j * rng.normal(size=(6, 6))
        values, vectors = np.linalg.eigh(step + step.conj().T)
        values *= 0.5 / np.abs(values).max()
        moved = w @ (vectors * np.exp(1j * values)) @ vectors.conj().T
        bound = largest_moves(w[None], moved[None])[0]
        assert bound == pytest.approx(0.5)
        a, b = (np.sort(np.angle(np.linalg.eigvals(x))) for x in (w, moved))
        # some cyclic matching keeps every phase within the bound
        distances = [
            np.abs(np.angle(np.exp(1j * (np.roll(b, shift) - a)))).max() for shift in range(6)
        ]
        assert min(distances) <= bound + 1e-9


def test_widest_free_interval() -> None:
    middle, half = reference_angle(np.array([0.1, 0.2, 6.0]))
    assert middle == pytest.approx(3.1)
    assert half == pytest.approx(2.9)
    middle, half = reference_angle(np.array([2.0, 3.0, 4.0]))
    assert middle == pytest.approx((3.0 + np.pi) % (2 * np.pi))
