"""Geometry of the Brillouin zone for drawing: the Wigner-Seitz cell of the reciprocal lattice."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
from ase.geometry import minkowski_reduce
from scipy.spatial import Voronoi

from topovet.arrays import FloatArray, IntArray

_SAME = 1e-4
"""Lengths below this share of the shortest reciprocal vector count as zero."""


@dataclass(frozen=True, slots=True, eq=False)
class Zone:
    """A convex cell about the origin, in 2D or 3D.

    Attributes
    ----------
    vertices
        (n, d) Cartesian, 1/angstrom; in 2D in order around the cell.
    normals
        (n_faces, d) outward unit normals of the faces (3D) or sides (2D).
    offsets
        (n_faces,) their distances from the origin, 1/angstrom.
    faces
        Vertex indices around each face in 3D; empty in 2D.
    """

    vertices: FloatArray
    normals: FloatArray
    offsets: FloatArray
    faces: tuple[IntArray, ...]

    @property
    def radius(self) -> float:
        """Largest distance of a vertex, 1/angstrom."""
        return float(np.linalg.norm(self.vertices, axis=1).max())

    def exit_distance(self, direction: FloatArray) -> float:
        """Distance from the origin to the surface along a unit vector, 1/angstrom."""
        towards = self.normals @ direction
        ahead = towards > 1e-9
        return float((self.offsets[ahead] / towards[ahead]).min())

    def edges(self) -> list[tuple[int, int, tuple[int, ...]]]:
        """Each edge of a 3D cell: its two vertices and the faces that meet there."""
        meeting: dict[tuple[int, int], list[int]] = {}
        for number, face in enumerate(self.faces):
            for a, b in zip(face.tolist(), np.roll(face, -1).tolist(), strict=True):
                meeting.setdefault((min(a, b), max(a, b)), []).append(number)
        return [(a, b, tuple(faces)) for (a, b), faces in sorted(meeting.items())]


def brillouin_zone(reciprocal: FloatArray) -> Zone:
    """First Brillouin zone.

    Parameters
    ----------
    reciprocal
        (d, d) reciprocal lattice vectors as rows, 1/angstrom, d = 2 or 3.

    Notes
    -----
    The cell is bounded by bisectors of short lattice vectors, so the basis is Minkowski-reduced
    first: in a skew basis they need large coefficients and would be missed.
    """
    short = _reduced(reciprocal)
    lattice = _integers(len(short)) @ short
    home = len(lattice) // 2
    diagram = Voronoi(lattice)
    # corners of other cells may lie at any distance, so only those of the home cell are touched
    region = np.array(sorted(diagram.regions[diagram.point_region[home]]))
    corners, merged = _merged(diagram.vertices[region], _SAME * float(_lengths(short).min()))
    faces, bounding = [], []
    for pair, ridge in zip(diagram.ridge_points, diagram.ridge_vertices, strict=True):
        if home not in pair:
            continue
        face = np.unique(merged[np.searchsorted(region, ridge)])
        if len(face) >= len(short):
            faces.append(face)
            bounding.append(lattice[pair.sum() - home])
    normals = np.array(bounding) / _lengths(np.array(bounding))[:, None]
    offsets = _lengths(np.array(bounding)) / 2
    if len(short) == 2:
        around = np.argsort(np.arctan2(corners[:, 1], corners[:, 0]))
        return Zone(corners[around], normals, offsets, ())
    loops = tuple(_around(corners, f, n) for f, n in zip(faces, normals, strict=True))
    return Zone(corners, normals, offsets, loops)


def nearest_images(point: FloatArray, reciprocal: FloatArray) -> FloatArray:
    """(n, d) images of a Cartesian k-point in the zone or on its surface, 1/angstrom."""
    short = _reduced(reciprocal)
    home = point - np.round(point @ np.linalg.inv(short)) @ short
    images = home + _integers(len(short)) @ short
    length = np.linalg.norm(images, axis=1)
    return np.asarray(images[length <= length.min() + _SAME * np.linalg.norm(short[0])])


def _integers(d: int) -> FloatArray:
    return np.array(list(itertools.product(range(-2, 3), repeat=d)), dtype=float)


def _lengths(vectors: FloatArray) -> FloatArray:
    return np.asarray(np.linalg.norm(vectors, axis=1))


def _merged(points: FloatArray, tolerance: float) -> tuple[FloatArray, IntArray]:
    """Points with near-coincident ones replaced by the first, and each old point's number there.

    Where more than the generic number of cells meet, Qhull returns one corner several times.
    """
    apart = np.linalg.norm(points[:, None] - points[None], axis=2)
    first = np.argmax(apart < tolerance, axis=1)
    kept, number = np.unique(first, return_inverse=True)
    return points[kept], np.asarray(number, dtype=np.int64)


def _around(corners: FloatArray, face: IntArray, normal: FloatArray) -> IntArray:
    """The corners of a face in order around its normal."""
    spokes = corners[face] - corners[face].mean(axis=0)
    across = np.cross(normal, spokes[0])
    return np.asarray(face[np.argsort(np.arctan2(spokes @ across, spokes @ spokes[0]))])


def _reduced(reciprocal: FloatArray) -> FloatArray:
    if len(reciprocal) == 3:
        return np.asarray(minkowski_reduce(reciprocal)[0])
    padded = np.eye(3)
    padded[:2, :2] = reciprocal
    padded[2, 2] = 100 * np.abs(reciprocal).max()
    return np.asarray(minkowski_reduce(padded, pbc=[True, True, False])[0][:2, :2])
