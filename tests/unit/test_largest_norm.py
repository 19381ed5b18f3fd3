"""The largest spectral norm of a stack, against numpy on every matrix."""

from __future__ import annotations

import numpy as np
import pytest

from topovet.arrays import largest_spectral_norm


@pytest.mark.parametrize("n", [1, 7, 40])
@pytest.mark.parametrize("hermitian", [False, True])
def test_against_all_singular_values(n: int, hermitian: bool) -> None:
    rng = np.random.default_rng(n)
    stack = rng.normal(size=(n, 5, 5, 2)) @ np.array([1, 1j])
    stack *= np.linspace(0.2, 3.0, n)[:, None, None]
    if hermitian:
        stack = stack + stack.conj().transpose(0, 2, 1)
    expected = np.linalg.norm(stack, ord=2, axis=(1, 2)).max()
    assert largest_spectral_norm(stack, hermitian=hermitian) == pytest.approx(expected, rel=1e-12)


def test_nothing_has_no_norm() -> None:
    assert largest_spectral_norm(np.zeros((0, 3, 3), dtype=complex)) == 0.0
