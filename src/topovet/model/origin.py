"""Whether two lists of positions stand on different origins."""

from __future__ import annotations

import numpy as np

from topovet.arrays import FloatArray
from topovet.model.crystal import Crystal
from topovet.model.nearest_image import nearest_images

SHIFT_ANG = 0.1
"""Positions that differ by one vector longer than this are told from another origin."""

SHIFT_SCATTER_ANG = 0.35
"""How far single functions may be off a common shift; Wannier centres scatter around their site."""


def common_shift(
    positions_frac: FloatArray, reference_frac: FloatArray, crystal: Crystal
) -> FloatArray | None:
    """The one vector by which all positions differ from their reference, modulo the lattice.

    Parameters
    ----------
    positions_frac, reference_frac
        (n, 3) fractional, in the same order: e.g. Wannier centres and declared sites.

    Returns
    -------
    FloatArray or None
        (3,) fractional; None where there is no common vector, or none longer than `SHIFT_ANG`.
    """
    apart = np.asarray(positions_frac, dtype=float) - np.asarray(reference_frac, dtype=float)
    aligned = apart - nearest_images(apart - apart[0], crystal.cell)[0]
    shift = np.median(aligned, axis=0)
    scatter = nearest_images(apart - shift, crystal.cell)[1]
    lattice, length = nearest_images(shift, crystal.cell)
    if scatter.max() > SHIFT_SCATTER_ANG or length <= SHIFT_ANG:
        return None
    return np.asarray(shift - lattice)
