"""Points to which descents led, made distinct, and their images under symmetry."""

from __future__ import annotations

import numpy as np
from scipy.spatial import cKDTree

from topovet.arrays import FloatArray, IntArray
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import eigenvalues

NEIGHBOURHOOD = 5e-3
"""Points nearer than this, in units of the shortest reciprocal vector, may be one closing."""

SAME_K = 1e-6
"""The same: points nearer than this are one."""

CLOSED_BETWEEN_EV = 1e-7
"""Two near points are one closing if the gap half-way between them is no larger than this beside
three times their own; between two nodes it opens."""

SPECIAL = 12
SNAP_FRAC = 1e-4
"""Coordinates this close to a multiple of 1/12 are tried there: descents onto a closing that is
not linear end a little beside it."""


def direct_gaps(bloch: BlochSum, k_frac: FloatArray, filling: int) -> FloatArray:
    """(n,) E[N] - E[N-1], eV."""
    energies = eigenvalues(bloch, k_frac)
    return np.asarray(energies[:, filling] - energies[:, filling - 1])


def folded(k_frac: FloatArray) -> FloatArray:
    """The same k with components in (-1/2, 1/2], to eleven decimals."""
    return np.asarray(np.round(0.5 - np.round((0.5 - k_frac) % 1.0, 11) % 1.0, 11) + 0.0)


def between(k_a: FloatArray, k_b: FloatArray) -> FloatArray:
    """k_b - k_a modulo reciprocal vectors, the short way, broadcast over leading axes."""
    away = np.asarray(k_b) - np.asarray(k_a)
    return np.asarray(away - np.round(away))


def snapped(bloch: BlochSum, k_frac: FloatArray, filling: int) -> FloatArray:
    """The points, moved onto special coordinates near by wherever the gap is no larger there."""
    if not len(k_frac):
        return k_frac
    grid = np.round(k_frac * SPECIAL) / SPECIAL
    near = np.where(np.abs(k_frac - grid) < SNAP_FRAC, grid, k_frac)
    before, after = (direct_gaps(bloch, k, filling) for k in (k_frac, near))
    better = after <= before + 1e-12
    return np.where(better[:, None], near, k_frac)


def first_of_each(
    bloch: BlochSum,
    k_frac: FloatArray,
    filling: int,
    reciprocal: FloatArray,
    images: IntArray,
    *,
    in_order: bool = False,
) -> IntArray:
    """(m,) one of each set of points that are one closing or images of each other.

    Parameters
    ----------
    bloch, filling
        The Hamiltonian, and the number of bands below the closing.
    k_frac
        (n, 3) points, each with a gap near zero.
    reciprocal
        (3, 3), 1/angstrom.
    images
        (g, 3, 3) integers, k' = k @ image.
    in_order
        Whether the first of a set is taken, and not the one with the least gap.
    """
    gaps = direct_gaps(bloch, k_frac, filling) if len(k_frac) else np.zeros(0)
    unit = float(np.linalg.norm(reciprocal, axis=1).min())
    kept: list[int] = []
    order = np.arange(len(gaps)) if in_order else np.argsort(gaps, kind="stable")
    for i in order.tolist():
        if not any(
            _is_one(
                bloch,
                k_frac[i],
                float(gaps[i]),
                k_frac[j],
                float(gaps[j]),
                filling,
                reciprocal,
                images,
                unit,
            )
            for j in kept
        ):
            kept.append(i)
    return np.array(kept, dtype=np.int64)


def _is_one(
    bloch: BlochSum,
    k: FloatArray,
    gap: float,
    other: FloatArray,
    other_gap: float,
    filling: int,
    reciprocal: FloatArray,
    images: IntArray,
    unit: float,
) -> bool:
    away = between(other @ images, k)
    length = np.linalg.norm(away @ reciprocal, axis=1) / unit
    nearest = int(length.argmin())
    if length[nearest] < SAME_K:
        return True
    if length[nearest] > NEIGHBOURHOOD:
        return False
    middle = k - away[nearest] / 2
    allowed = CLOSED_BETWEEN_EV + 3 * max(gap, other_gap)
    worse = gap > 1e-6 and other_gap < 1e-3 * gap  # a descent that ended beside a closing
    return worse or float(direct_gaps(bloch, middle[None], filling)[0]) < allowed


def unfolded(k_frac: FloatArray, images: IntArray) -> FloatArray:
    """(n, 3) distinct images of one k, folded, the k itself first."""
    kept: list[FloatArray] = []
    for k in folded(k_frac @ images):
        if not any(np.abs(between(other, k)).max() < 10 * SAME_K for other in kept):
            kept.append(k)
    return np.array(kept)


def distances_to(points: FloatArray, k_frac: FloatArray) -> FloatArray:
    """(n,) distance in fractional k, modulo 1, from each k to the nearest of some points.

    Parameters
    ----------
    points
        (m, 3), m at least 1.
    k_frac
        (n, 3).
    """
    tree = cKDTree(points % 1.0 % 1.0, boxsize=1.0)
    return np.asarray(tree.query(k_frac % 1.0 % 1.0)[0])
