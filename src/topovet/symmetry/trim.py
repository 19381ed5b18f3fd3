"""Time-reversal-invariant momenta, and the fixed list of k on which residuals are sampled."""

from __future__ import annotations

import itertools

import numpy as np

from topovet.arrays import FloatArray

N_SAMPLE = 24
"""Generic k-points on which the residual of a symmetry is measured, besides the TRIM."""


def trim_points(periodic: tuple[bool, bool, bool]) -> FloatArray:
    """(8, 3) TRIM of a crystal, (4, 3) in 2D: entries 0 or 1/2, the last component fastest."""
    choices = [(0.0, 0.5) if is_periodic else (0.0,) for is_periodic in periodic]
    return np.array(list(itertools.product(*choices)))


def sample_points(periodic: tuple[bool, bool, bool], n: int = N_SAMPLE) -> FloatArray:
    """(n, 3) generic k-points, the same in every run.

    An additive (Kronecker) sequence with the square roots of 2, 3 and 5: evenly spread and off
    every symmetry element.
    """
    steps = np.sqrt(np.array([2.0, 3.0, 5.0])) * np.asarray(periodic, dtype=float)
    return np.asarray((np.arange(1, n + 1)[:, None] * steps) % 1.0)
