"""Nearest lattice images, also in skewed cells, where rounding fractions finds the wrong one."""

from __future__ import annotations

import itertools

import numpy as np
from ase.geometry import minkowski_reduce

from topovet.arrays import FloatArray, IntArray

_NEIGHBOURS = np.array(list(itertools.product((-1, 0, 1), repeat=3)), dtype=np.int64)


def nearest_images(vectors_frac: FloatArray, cell: FloatArray) -> tuple[IntArray, FloatArray]:
    """The lattice vector nearest to each vector, and how far it is.

    Parameters
    ----------
    vectors_frac
        (..., 3) fractional.
    cell
        (3, 3) angstrom, rows.

    Returns
    -------
    tuple
        (..., 3) integer lattice vectors, and (...,) distances in angstrom of the vectors from them.
    """
    lattice, distances = image_distances(vectors_frac, cell)
    at = distances.argmin(axis=-1)[..., None]
    nearest = np.take_along_axis(lattice, at[..., None], axis=-2)[..., 0, :]
    return nearest, np.take_along_axis(distances, at, axis=-1)[..., 0]


def image_distances(vectors_frac: FloatArray, cell: FloatArray) -> tuple[IntArray, FloatArray]:
    """Distances of each vector from the 27 lattice vectors around it.

    In a Minkowski-reduced cell the nearest lattice vector is among the neighbours of the rounded
    one.

    Returns
    -------
    tuple
        (..., 27, 3) integer lattice vectors in the given cell, (..., 27) distances in angstrom.
    """
    reduced, turn = reduce_cell(cell)
    inverse = np.round(np.linalg.inv(turn)).astype(np.int64)
    in_reduced = np.asarray(vectors_frac, dtype=float) @ inverse
    rounded = np.round(in_reduced)
    offsets = (in_reduced - rounded)[..., None, :] - _NEIGHBOURS
    distances = np.linalg.norm(offsets @ reduced, axis=-1)
    lattice = (rounded.astype(np.int64)[..., None, :] + _NEIGHBOURS) @ turn
    return np.asarray(lattice), np.asarray(distances)


def reduce_cell(cell: FloatArray) -> tuple[FloatArray, IntArray]:
    """Minkowski-reduced cell (3, 3) angstrom and the integer matrix: reduced = matrix @ cell."""
    reduced, turn = minkowski_reduce(np.asarray(cell, dtype=float))
    return np.asarray(reduced, dtype=float), np.round(turn).astype(np.int64)
