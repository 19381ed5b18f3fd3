"""The part of the Brillouin zone that a proof has to cover, as a convex region in its own axes.

For a group of images k' = k @ W (integer matrices, reciprocal lattice vectors understood) and a
generic point p, the points that are no farther from p than from any other point of its orbit
{p W + G} form a convex polytope, the cell of p. The cells of the whole orbit cover all of k space,
and the image that takes another cell's point onto p takes that cell onto this one, distances being
kept by the metric: every k has an image in the cell of p. Leaving out some of the planes that bound
the cell only makes it larger, so a plane that is missed costs boxes, not truth.

A box is left out of the proof only if it lies beyond one of the planes by more than a margin.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
from ase.geometry import minkowski_reduce
from scipy.optimize import linprog
from scipy.spatial import HalfspaceIntersection, QhullError

from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.spectrum.proof.boxes import Boxes

N_SEEDS = 10
"""Generic points that are tried; the cell that fills its bounding box best is taken."""

NEAREST = 200
MARGIN = 1e-6
"""In units of the bounding box: linear programs are solved to 1e-7 (scipy, HiGHS)."""


@dataclass(frozen=True, slots=True, eq=False)
class Region:
    """The cell of a point, in coordinates u with k = origin + u @ axes.

    Attributes
    ----------
    origin, axes
        (3,) and (d, 3) fractional; [0, 1]^d holds the cell.
    normals, offsets
        (p, d) and (p,): the cell is normals @ u <= offsets.
    images
        (g, 3, 3) integers, a group.
    seed, metric, sites
        See `Certificate`.
    """

    origin: FloatArray
    axes: FloatArray
    normals: FloatArray
    offsets: FloatArray
    images: IntArray
    seed: FloatArray
    metric: FloatArray
    sites: FloatArray

    def may_hold(self, boxes: Boxes) -> BoolArray:
        """(n,) False only for boxes that lie outside."""
        reach = np.abs(self.normals) @ boxes.half_widths.T
        nearest = self.normals @ boxes.centres.T - reach
        return np.asarray(np.all(nearest <= self.offsets[:, None] + MARGIN, axis=0))


def choose_region(
    images: IntArray, reciprocal: FloatArray, periodic: tuple[bool, bool, bool]
) -> Region:
    """The cell of a well-placed point.

    Parameters
    ----------
    images
        (g, 3, 3) integer matrices with k' = k @ image, a group that holds the identity.
    reciprocal
        (3, 3) reciprocal vectors as rows.
    periodic
        Periodic directions; k is 0 along the others.
    """
    used = np.flatnonzero(periodic)
    group = images[:, used][:, :, used]
    metric = (reciprocal @ reciprocal.T)[np.ix_(used, used)]
    metric = np.mean([w @ metric @ w.T for w in group], axis=0)
    to_cart = np.linalg.cholesky(metric)  # x = k @ to_cart keeps distances
    short = _short_vectors(to_cart)
    best: tuple[float, FloatArray, FloatArray, FloatArray] | None = None
    for place in np.random.default_rng(0).random((N_SEEDS, len(used))) - 0.5:
        seed = place @ short
        sites = _nearest_sites(seed, group, to_cart, short)
        corners = _corners(seed @ to_cart, sites @ to_cart)
        if corners is None:
            continue
        for frame in _frames(seed @ to_cart, sites @ to_cart, corners):
            volume = float(np.prod(np.ptp(corners @ frame.T, axis=0)))
            if best is None or volume < best[0] * (1 - 1e-6):
                best = (volume, seed, _touching(seed, sites, to_cart, corners), frame)
    assert best is not None, "no generic point among many"
    _, seed, sites, frame = best
    return _region(seed, sites, frame, to_cart, images, used)


def planes_between(seed: FloatArray, sites: FloatArray) -> tuple[FloatArray, FloatArray]:
    """normals (p, d), of length 1, and offsets: x is no farther from seed than from any site."""
    normals = sites - seed
    length = np.linalg.norm(normals, axis=1)
    offsets = (np.sum(sites**2, axis=1) - np.sum(seed**2)) / 2
    return normals / length[:, None], offsets / length


def bounding_box(normals: FloatArray, offsets: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Corners (d,), (d,) of the smallest box around {normals @ x <= offsets}, by linear programs.

    Raises
    ------
    ValueError
        The region is empty or without bounds.
    """
    ends = []
    for direction in np.concatenate([np.eye(normals.shape[1]), -np.eye(normals.shape[1])]):
        found = linprog(direction, A_ub=normals, b_ub=offsets, bounds=(None, None))
        if found.status != 0:
            raise ValueError(f"no bounded region: {found.message}")
        ends.append(float(found.fun))
    d = normals.shape[1]
    return np.array(ends[:d]), -np.array(ends[d:])


def _short_vectors(to_cart: FloatArray) -> FloatArray:
    """(d, d) integers: the shortest reciprocal lattice vectors of a cell, however skewed."""
    d = len(to_cart)
    padded = np.eye(3)
    padded[:d, :d] = to_cart
    _, short = minkowski_reduce(padded, pbc=np.arange(3) < d)
    return np.asarray(short, dtype=float)[:d, :d]


def _nearest_sites(
    seed: FloatArray, group: IntArray, to_cart: FloatArray, short: FloatArray
) -> FloatArray:
    """The nearest other points of the orbit, fractional."""
    cells = np.array(list(itertools.product(range(-2, 3), repeat=len(seed)))) @ short
    away = (seed @ group - seed) @ np.linalg.inv(short)
    orbit = (seed + (away - np.round(away)) @ short)[:, None, :] + cells
    orbit = orbit.reshape(-1, len(seed))
    distance = np.linalg.norm((orbit - seed) @ to_cart, axis=1)
    order = np.argsort(distance, kind="stable")
    order = order[distance[order] > 1e-6 * distance.max()][:NEAREST]
    return np.asarray(orbit[order])


def _corners(seed: FloatArray, sites: FloatArray) -> FloatArray | None:
    """Corners of the cell; None where the point is not generic enough."""
    normals, offsets = planes_between(seed, sites)
    if len(seed) == 1:
        return np.array(
            [[-np.min(offsets[normals[:, 0] < 0])], [np.min(offsets[normals[:, 0] > 0])]]
        )
    try:
        made = HalfspaceIntersection(np.column_stack([normals, -offsets]), seed)
    except QhullError:
        return None
    corners = made.intersections
    return np.asarray(corners[np.isfinite(corners).all(axis=1)])


def _touching(
    seed: FloatArray, sites: FloatArray, to_cart: FloatArray, corners: FloatArray
) -> FloatArray:
    """The sites whose planes bound the cell."""
    normals, offsets = planes_between(seed @ to_cart, sites @ to_cart)
    n_corners = np.sum(np.abs(corners @ normals.T - offsets) < 1e-9, axis=0)
    return np.asarray(sites[n_corners >= len(seed)])


def _frames(seed: FloatArray, sites: FloatArray, corners: FloatArray) -> list[FloatArray]:
    """Orthonormal axes, as rows, along the planes that bound the cell."""
    d = len(seed)
    normals, _ = planes_between(seed, _touching(seed, sites, np.eye(d), corners))
    frames = [np.eye(d)]
    for i, j in itertools.permutations(range(len(normals)), min(2, d)) if d > 1 else ():
        second = normals[j] - (normals[j] @ normals[i]) * normals[i]
        if np.linalg.norm(second) < 1e-3:
            continue
        rows = [normals[i], second / np.linalg.norm(second)]
        if d == 3:
            rows.append(np.cross(*rows))
        frames.append(np.array(rows))
    return frames


def _region(
    seed: FloatArray,
    sites: FloatArray,
    frame: FloatArray,
    to_cart: FloatArray,
    images: IntArray,
    used: IntArray,
) -> Region:
    normals, offsets = planes_between(seed @ to_cart, sites @ to_cart)
    low, high = bounding_box(normals @ frame.T, offsets)
    low, high = low - MARGIN * (high - low), high + MARGIN * (high - low)
    from_cart = np.linalg.inv(to_cart)
    origin, axes = np.zeros(3), np.zeros((len(used), 3))
    origin[used] = low @ frame @ from_cart
    axes[:, used] = ((high - low)[:, None] * frame) @ from_cart
    in_u = (normals @ frame.T) * (high - low)
    scale = np.linalg.norm(in_u, axis=1)
    full_seed, full_sites, metric = np.zeros(3), np.zeros((len(sites), 3)), np.zeros((3, 3))
    full_seed[used], full_sites[:, used] = seed, sites
    metric[np.ix_(used, used)] = to_cart @ to_cart.T
    return Region(
        origin=origin,
        axes=axes,
        normals=in_u / scale[:, None],
        offsets=(offsets - normals @ frame.T @ low) / scale,
        images=images,
        seed=full_seed,
        metric=metric,
        sites=full_sites,
    )
