"""One shift of all positions told from scatter and from single strays."""

from __future__ import annotations

import numpy as np

from topovet.model.crystal import Crystal
from topovet.model.origin import common_shift


def test_common_shift_of_scattered_centres() -> None:
    rng = np.random.default_rng(0)
    crystal = Crystal(6 * np.eye(3), (), np.zeros((0, 3)))
    declared = rng.random((12, 3))
    moved = declared + np.array([0.2, 0.0, -0.1]) + rng.integers(-2, 3, (12, 3))
    scattered = moved + rng.uniform(-0.02, 0.02, (12, 3))
    found = common_shift(scattered, declared, crystal)
    assert found is not None
    np.testing.assert_allclose(found, [0.2, 0, -0.1], atol=0.02)
    assert common_shift(declared, declared, crystal) is None
    broken = scattered.copy()
    broken[3] += 0.2
    assert common_shift(broken, declared, crystal) is None
