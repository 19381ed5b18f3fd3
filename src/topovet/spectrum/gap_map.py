"""The direct gap over a lattice plane of k through its minimum."""

from __future__ import annotations

import numpy as np

from topovet.arrays import FloatArray
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import eigenvalues
from topovet.spectrum.results import GapMap

POINTS = 2400
"""Points of a map, about: fine enough to see a ring or a cone, at the price of a coarse mesh."""

LOWEST_SHARE = 0.1
"""A plane is judged by the mean gap of this share of its mesh points, those with the lowest."""


def choose_axis(
    mesh_gaps: FloatArray, k_frac: FloatArray, periodic: tuple[bool, bool, bool]
) -> int:
    """Component of k to hold fixed, so that the plane keeps most of what is low.

    Parameters
    ----------
    mesh_gaps
        (n_1, n_2, n_3) direct gaps, eV, on a mesh that holds the origin.
    k_frac
        (3,) where the gap is smallest.
    periodic
        A 2D crystal has one plane only.
    """
    if not all(periodic):
        return periodic.index(False)
    means = []
    for axis, n in enumerate(mesh_gaps.shape):
        plane = np.take(mesh_gaps, round(k_frac[axis] * n) % n, axis=axis).reshape(-1)
        kept = max(1, int(LOWEST_SHARE * len(plane)))
        means.append(float(np.partition(plane, kept - 1)[:kept].mean()))
    return int(np.argmin(means))


def map_gap(
    bloch: BlochSum, crystal: Crystal, filling: int, k_frac: FloatArray, axis: int
) -> GapMap:
    """Direct gap on a mesh of one reciprocal cell of the plane, the minimum near its middle.

    Parameters
    ----------
    bloch, crystal
        The Hamiltonian, its reciprocal lattice.
    filling
        Bands below the gap.
    k_frac
        (3,) a point of the plane, the minimum.
    axis
        Component of k that is the same all over the plane.
    """
    i, j = (a for a in range(3) if a != axis)
    n_i, n_j = _points(crystal, i, j)
    centre = np.round(2 * k_frac) / 2
    u = centre[i] + np.linspace(-0.5, 0.5, n_i)
    v = centre[j] + np.linspace(-0.5, 0.5, n_j)
    grid = np.stack(np.meshgrid(u, v, indexing="ij"), axis=-1).reshape(-1, 2)
    plane = bloch.partial((axis,), np.array([k_frac[axis]]))
    energies = eigenvalues(plane, grid)
    gaps = energies[:, filling] - energies[:, filling - 1]
    return GapMap(
        axis=axis,
        fixed_frac=float(k_frac[axis]),
        u_frac=u,
        v_frac=v,
        gap_ev=gaps.reshape(n_i, n_j),
        minimum_frac=(float(k_frac[0]), float(k_frac[1]), float(k_frac[2])),
    )


def _points(crystal: Crystal, i: int, j: int) -> tuple[int, int]:
    """Odd numbers of points, in proportion to the lengths of the two reciprocal vectors."""
    lengths = np.linalg.norm(crystal.reciprocal[[i, j]], axis=1)
    n = np.sqrt(POINTS * lengths / lengths[::-1])
    n_i, n_j = (2 * int(np.clip(round(x / 2), 8, 60)) + 1 for x in n)
    return n_i, n_j
