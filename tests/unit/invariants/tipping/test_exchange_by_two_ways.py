"""The first exchange along H + t V and all exchanges along a walk come from code of their own."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from topovet.deformation.exchange import Sectors, find_exchanges
from topovet.invariants.tipping.exchange import first_exchange, parity_blocks

SIZE, FILLED_PAIRS = 4, 3


def _pairs_of(rng: np.random.Generator, size: int) -> np.ndarray:
    """A Hermitian block whose levels come in pairs."""
    a = rng.normal(size=(size, size)) + 1j * rng.normal(size=(size, size))
    return np.kron(a + a.conj().T, np.eye(2))


@given(st.integers(0, 10_000))
@settings(max_examples=40, deadline=None)
def test_both_find_the_same_first_exchange(seed: int) -> None:
    rng = np.random.default_rng(seed)
    even, odd = ((_pairs_of(rng, SIZE), _pairs_of(rng, SIZE)) for _ in range(2))
    n = 2 * SIZE
    h, v = (
        np.block([[even[i], np.zeros((n, n))], [np.zeros((n, n)), odd[i]]]).astype(complex)
        for i in range(2)
    )
    inversion = np.diag([1.0] * n + [-1.0] * n).astype(complex)
    first = first_exchange(parity_blocks(h, v, inversion), FILLED_PAIRS, 1.0)
    rate = float(np.ptp(np.linalg.eigvalsh(v)))
    sectors = Sectors((0.0, 0.0, 0.0), 2 * FILLED_PAIRS, even, odd, rate, 1e-12)
    all_of_them = find_exchanges(sectors)
    if first.at is None:
        assert all_of_them == ()
        return
    assert all_of_them[0].lam == pytest.approx(first.at, abs=2e-6)
    assert all_of_them[0].n_minus_before == 2 * first.n_odd
    assert all_of_them[0].n_minus_after == 2 * first.n_odd_after
