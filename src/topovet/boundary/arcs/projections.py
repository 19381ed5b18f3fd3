"""Nodes projected on the zone of a surface.

k'_i = k.a'_i in the re-cut cell: the first two components say where on the surface a node falls.
Those that fall together act together, with the sum of their chiralities.
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence

import numpy as np

from topovet.arrays import FloatArray
from topovet.boundary.arcs.results import Projection
from topovet.boundary.recut import Recut
from topovet.invariants.nodes.results import PointNode

TOGETHER = 0.01
"""Of the shortest reciprocal vector of the surface: nodes that fall nearer to each other than this
are one projection. Symmetry that a file breaks by some meV moves nodes by less."""

NEIGHBOURS = np.array([(i, j) for i in (-1, 0, 1) for j in (-1, 0, 1)])


def surface_frame(cut: Recut) -> FloatArray:
    """(2, 3) unit vectors along a'_1 and along n x a'_1: right-handed about n in Cartesian space.

    Also where the cell is left-handed, as chirality is that of Cartesian k.
    """
    first = cut.cell[0] / np.linalg.norm(cut.cell[0])
    return np.stack([first, np.cross(cut.normal_cart, first)])


def fractional(cut: Recut, k_ang: FloatArray) -> FloatArray:
    """(n, 2) k_par from Cartesian ones (1/angstrom) in `surface_frame`."""
    return np.asarray(k_ang @ (surface_frame(cut) @ cut.cell[:2].T) / (2 * np.pi))


def cartesian(cut: Recut, k_par: FloatArray) -> FloatArray:
    """The inverse of `fractional`."""
    return np.asarray(2 * np.pi * k_par @ np.linalg.inv(surface_frame(cut) @ cut.cell[:2].T))


def shortest_vector(cut: Recut) -> float:
    """Length of the shortest reciprocal vector of the surface, 1/angstrom."""
    return float(np.linalg.norm(cartesian(cut, NEIGHBOURS[NEIGHBOURS.any(axis=1)]), axis=1).min())


def distances(cut: Recut, k_par: FloatArray, others: FloatArray) -> FloatArray:
    """(n, m) 1/angstrom between k_par (n, 2) and the nearest images of others (m, 2)."""
    apart = others[None] - k_par[:, None]
    apart = apart - np.round(apart)
    images = cartesian(cut, apart[:, :, None] + NEIGHBOURS)
    return np.asarray(np.linalg.norm(images, axis=-1).min(axis=-1))


def project_nodes(points: Sequence[PointNode], cut: Recut) -> tuple[Projection, ...]:
    """Where nodes fall on the surface, largest |sum of chiralities| first.

    Parameters
    ----------
    points
        Nodes of the whole zone, each with its charge.
    cut
        The surface.
    """
    k_par = np.array([p.k for p in points]).reshape(-1, 3) @ cut.matrix[:2].T
    k_par = (k_par + 0.5) % 1.0 - 0.5
    near = distances(cut, k_par, k_par) < TOGETHER * shortest_vector(cut)
    groups: list[list[int]] = []
    for i in range(len(points)):
        joined = [g for g in groups if near[i, g].any()]
        groups = [g for g in groups if g not in joined] + [[i, *itertools.chain(*joined)]]
    groups.sort(key=min)
    places = np.array([k_par[g[0]] for g in groups])
    apart = distances(cut, places, places)
    np.fill_diagonal(apart, shortest_vector(cut))
    made = []
    for place, group, nearest in zip(places, groups, apart.min(axis=1), strict=True):
        energies = [points[i].energy_ev for i in group]
        x, y = cartesian(cut, place).tolist()
        made.append(
            Projection(
                k_par=(float(place[0]), float(place[1])),
                k_ang=(x, y),
                nodes=tuple(sorted(group)),
                chirality=sum(points[i].charge or 0 for i in group),
                energy_min_ev=min(energies),
                energy_max_ev=max(energies),
                nearest_ang=float(nearest),
            )
        )
    return tuple(sorted(made, key=lambda p: -abs(p.chirality)))
