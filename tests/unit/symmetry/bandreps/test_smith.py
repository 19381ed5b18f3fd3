"""The Smith normal form: its definition, and divisors by determinants of minors."""

from __future__ import annotations

import itertools
from math import gcd

import numpy as np
import pytest

from topovet.symmetry.bandreps.smith import smith_normal_form


@pytest.mark.parametrize("seed", range(12))
def test_definition_and_minors(seed: int) -> None:
    """The product of the first r divisors is the greatest common divisor of all r x r minors."""
    rng = np.random.default_rng(seed)
    m, n = rng.integers(1, 5, size=2)
    a = rng.integers(-6, 7, size=(m, n)) * rng.integers(1, 4)
    form = smith_normal_form(a)
    expected = np.zeros((m, n), dtype=object)
    for i, d in enumerate(form.divisors):
        expected[i, i] = d
    assert np.array_equal(form.left @ a.astype(object) @ form.right, expected)
    for matrix in (form.left, form.right):
        assert abs(round(np.linalg.det(matrix.astype(float)))) == 1
    assert all(b % a == 0 for a, b in itertools.pairwise(form.divisors))
    for r in range(1, form.rank + 1):
        minors = [
            round(np.linalg.det(a[np.ix_(rows, columns)]))
            for rows in itertools.combinations(range(m), r)
            for columns in itertools.combinations(range(n), r)
        ]
        assert np.prod(form.divisors[:r]) == gcd(*minors)


def test_entries_beyond_64_bits() -> None:
    """A Hilbert-like matrix of large integers: exact where floating point is not."""
    a = np.array([[10**20 + 1, 10**19], [10**21, 10**18 + 7]], dtype=object)
    form = smith_normal_form(a)
    determinant = abs(int(a[0, 0] * a[1, 1] - a[0, 1] * a[1, 0]))
    assert form.divisors[0] * form.divisors[1] == determinant
    assert np.array_equal(
        form.left @ a @ form.right, np.diag(np.array(form.divisors, dtype=object))
    )
