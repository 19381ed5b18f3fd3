"""The first exchange of parities: closed forms, and brute force on random blocks."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from topovet.arrays import ComplexArray
from topovet.invariants.exchange import (
    RESOLUTION,
    ParityBlocks,
    first_exchange,
    parity_blocks,
)

REACH = 2.0


def paired(h: ComplexArray) -> ComplexArray:
    """Every level twice."""
    return np.kron(h, np.eye(2))


def random_hermitian(rng: np.random.Generator, n: int) -> ComplexArray:
    h = rng.normal(size=(n, n)) + 1j * rng.normal(size=(n, n))
    return 0.5 * (h + h.conj().T)


def random_change(rng: np.random.Generator, n: int, *, projector: bool) -> ComplexArray:
    if not projector:
        return random_hermitian(rng, n)
    vectors = np.linalg.qr(random_hermitian(rng, n))[0][:, : rng.integers(0, n + 1)]
    return np.asarray(vectors @ vectors.conj().T)


def odd_pairs(blocks: ParityBlocks, filled: int, t: float) -> int:
    """Odd pairs among the lowest, counted plainly at one t."""
    levels = [
        (energy, odd)
        for odd, (h, v) in enumerate(zip(blocks.h, blocks.v, strict=True))
        for energy in np.linalg.eigvalsh(h + t * v)[::2]
    ]
    return sum(odd for _, odd in sorted(levels)[:filled])


@settings(max_examples=60, deadline=None)
@given(seed=st.integers(0, 10**6), projector=st.booleans(), sign=st.sampled_from([-1, 1]))
def test_first_exchange_is_the_first_that_a_plain_scan_finds(
    seed: int, projector: bool, sign: int
) -> None:
    rng = np.random.default_rng(seed)
    sizes = rng.integers(1, 5, size=2)
    even, odd = (paired(random_hermitian(rng, n)) for n in sizes)
    v_even, v_odd = (paired(random_change(rng, n, projector=projector)) for n in sizes)
    blocks = ParityBlocks((even, odd), (v_even, v_odd))
    filled = int(rng.integers(1, sum(sizes)))
    found = first_exchange(blocks, filled, sign * REACH)
    ts = sign * np.linspace(0, REACH, 201)
    counts = np.array([odd_pairs(blocks, filled, float(t)) for t in ts])
    assert found.n_odd == counts[0]
    changed = np.flatnonzero(counts != counts[0])
    if found.at is None:
        assert found.free_up_to == sign * REACH
        assert not len(changed)
        return
    assert not len(changed) or abs(found.at) <= abs(ts[changed[0]]) + RESOLUTION
    before, after = (found.at - sign * 2 * RESOLUTION, found.at + sign * 2 * RESOLUTION)
    assert odd_pairs(blocks, filled, before) == found.n_odd
    assert odd_pairs(blocks, filled, after) == found.n_odd_after != found.n_odd
    between = np.flatnonzero(np.abs(ts) < abs(found.at))
    assert (counts[between] == found.n_odd).all()


def diagonal(*energies: float) -> ComplexArray:
    return paired(np.diag(energies).astype(complex))


@pytest.mark.parametrize(("gap", "slope"), [(0.5, 1.0), (0.3, 0.2), (1.9, 1.0), (1e-4, 1e-3)])
def test_levels_that_meet_at_a_known_point(gap: float, slope: float) -> None:
    blocks = ParityBlocks((diagonal(0.0), diagonal(gap)), (diagonal(slope), diagonal(0.0)))
    found = first_exchange(blocks, 1, REACH)
    assert found.at == pytest.approx(gap / slope, abs=RESOLUTION)
    assert (found.n_odd, found.n_odd_after) == (0, 1)
    assert first_exchange(blocks, 1, -REACH).at is None


def test_an_avoided_meeting_is_no_exchange() -> None:
    """Levels of one parity repel; the other parity stays above."""
    h = paired(np.array([[0.0, 1e-3], [1e-3, 0.1]], dtype=complex))
    blocks = ParityBlocks((h, diagonal(5.0)), (diagonal(1.0, 0.0), diagonal(0.0)))
    found = first_exchange(blocks, 1, REACH)
    assert (found.at, found.free_up_to) == (None, REACH)


def test_levels_that_stay_together_are_left_open() -> None:
    """Degenerate levels of opposite parity that move together: nobody can tell them apart."""
    blocks = ParityBlocks((diagonal(0.0), diagonal(0.0)), (diagonal(1.0), diagonal(1.0)))
    found = first_exchange(blocks, 1, REACH)
    assert found.at is None
    assert found.free_up_to == 0.0


def test_blocks_of_an_inversion_that_exchanges_two_sites() -> None:
    """Bonding is even, antibonding odd: energies -t and t for hopping -t."""
    swap = paired(np.array([[0, 1], [1, 0]], dtype=complex))
    blocks = parity_blocks(-0.7 * swap, np.eye(4, dtype=complex), swap)
    assert np.linalg.eigvalsh(blocks.h[0]) == pytest.approx([-0.7, -0.7])
    assert np.linalg.eigvalsh(blocks.h[1]) == pytest.approx([0.7, 0.7])
    assert blocks.closing_rate == pytest.approx(0.0, abs=1e-12)
