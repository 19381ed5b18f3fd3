"""Where everything stands in the drawing of a Brillouin zone: view, momenta, axes, labels."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.invariants.results import TrimParity
from topovet.model.crystal import Crystal
from topovet.notation import k_text
from topovet.report.figures.labels import Placement, place_labels
from topovet.report.figures.wigner_seitz import Zone, nearest_images

POINTS_PER_RADIUS = 118.0
_MARGIN_PT = 5.0
_REACH = 0.3
"""How far the axes reach out of the zone, in zone radii."""
MARK_PT = 13.0
_NAME_PT = 15.0
_CLEARANCE_PT = 9.0


@dataclass(frozen=True, slots=True, eq=False)
class Momentum:
    """A TRIM as drawn: fractional k, images on the zone (1/angstrom), sign or None."""

    k: tuple[float, float, float]
    images: FloatArray
    delta: int | None

    @property
    def label(self) -> str:
        return f"Γ {k_text(self.k)}" if not any(self.k) else k_text(self.k)


@dataclass(frozen=True, slots=True, eq=False)
class Scene:
    """All positions in the plane of the drawing, in zone radii.

    Attributes
    ----------
    turn
        (d, d) rows: to the right, upward and, in 3D, towards the viewer.
    marks
        (n, 2) one image of each TRIM, the one nearest to the viewer.
    leaves, tips
        (d, 2) where each axis leaves the zone, and its end.
    names
        (d, 2) centres of the axes' names.
    labels
        Centres of the labels, points from the middle.
    sizes
        (n, 2) width and height of the labels, points.
    """

    turn: FloatArray
    marks: FloatArray
    leaves: FloatArray
    tips: FloatArray
    names: FloatArray
    labels: Placement
    sizes: FloatArray

    def extent(self, outline: FloatArray) -> FloatArray:
        """(2, 2) lower and upper corner of all that is drawn, points from the middle."""
        reach = np.concatenate(
            [
                _corners(POINTS_PER_RADIUS * outline, 2.0),
                _corners(POINTS_PER_RADIUS * self.marks, MARK_PT),
                _corners(POINTS_PER_RADIUS * self.names, _NAME_PT),
                _corners(self.labels.centres, self.sizes),
            ]
        )
        return np.array([reach.min(axis=0) - _MARGIN_PT, reach.max(axis=0) + _MARGIN_PT])


def periodic_reciprocal(crystal: Crystal) -> tuple[FloatArray, tuple[str, ...]]:
    """(d, d) reciprocal vectors of the periodic directions in d Cartesian axes, and their names.

    In 2D the axes span the plane of the two periodic lattice vectors, the first axis along the
    first of them.
    """
    directions = [i for i in range(3) if crystal.periodic[i]]
    names = tuple(f"b{'₁₂₃'[i]}" for i in directions)
    if len(directions) == 3:
        return crystal.reciprocal, names
    in_plane = crystal.cell[directions]
    along = in_plane[0] / np.linalg.norm(in_plane[0])
    rest = in_plane[1] - (in_plane[1] @ along) * along
    frame = np.array([along, rest / np.linalg.norm(rest)])
    return np.asarray(2 * np.pi * np.linalg.inv(in_plane @ frame.T).T), names


def momenta_of(
    crystal: Crystal, reciprocal: FloatArray, trim: Sequence[TrimParity]
) -> list[Momentum]:
    signs = {tuple(np.round(2 * np.asarray(t.k)).astype(int) % 2): t.delta for t in trim}
    momenta = []
    for half in itertools.product(*((0, 1) if periodic else (0,) for periodic in crystal.periodic)):
        within = np.array([h / 2 for h, p in zip(half, crystal.periodic, strict=True) if p])
        k = (half[0] / 2, half[1] / 2, half[2] / 2)
        images = nearest_images(within @ reciprocal, reciprocal)
        momenta.append(Momentum(k, images, signs.get(half)))
    return momenta


def best_scene(zone: Zone, reciprocal: FloatArray, momenta: Sequence[Momentum]) -> Scene:
    """The scene, of a fixed set of views, with the least overlap and the best-separated marks."""
    if not zone.faces:
        return _scene(zone, reciprocal, momenta, np.eye(2))
    views = [view(a, e) for e in (14, 20, 26, 32) for a in range(0, 360, 12)]
    scenes = [_scene(zone, reciprocal, momenta, turn) for turn in views]
    return min(scenes, key=lambda scene: _badness(scene, zone))


def _badness(scene: Scene, zone: Zone) -> float:
    """Overlap of labels in square points, less what speaks for the view.

    For it: marks that stand apart, axes that are not seen end-on, faces not seen edge-on (a
    hexagonal prism would look like a box).
    """
    apart = np.linalg.norm(scene.marks[:, None] - scene.marks[None], axis=2)
    np.fill_diagonal(apart, np.inf)
    axis = np.linalg.norm(scene.tips - scene.leaves, axis=1).min()
    face = np.abs(zone.normals @ scene.turn[2]).min()
    merit = 400 * min(apart.min(), 0.4) + 300 * min(axis, 0.2) + 800 * min(face, 0.12)
    return float(round(scene.labels.overlap - merit, 3))


def view(azimuth: float, elevation: float) -> FloatArray:
    ca, sa = np.cos(np.radians(azimuth)), np.sin(np.radians(azimuth))
    ce, se = np.cos(np.radians(elevation)), np.sin(np.radians(elevation))
    return np.array([[-sa, ca, 0.0], [-se * ca, -se * sa, ce], [ce * ca, ce * sa, se]])


def _scene(
    zone: Zone, reciprocal: FloatArray, momenta: Sequence[Momentum], turn: FloatArray
) -> Scene:
    marks = np.array([_front(m, turn) for m in momenta]) / zone.radius
    directions = reciprocal / np.linalg.norm(reciprocal, axis=1)[:, None]
    reach = np.array([zone.exit_distance(d) for d in directions])[:, None] / zone.radius
    flat = directions @ turn[:2].T
    leaves, tips = reach * flat, (reach + _REACH) * flat
    names = tips * (1 + 0.1 / np.maximum(np.linalg.norm(tips, axis=1), 0.1))[:, None]
    sizes = np.array([(5.0 * len(m.label), 10.0) for m in momenta])
    along = [leaves + s * (tips - leaves) for s in (0.2, 0.4, 0.6, 0.8, 1.0)]
    points = POINTS_PER_RADIUS
    obstacles = np.concatenate(
        [_boxes(points * marks, MARK_PT), _boxes(points * names, _NAME_PT)]
        + [_boxes(points * place, 4.0) for place in along]
    )
    labels = place_labels(points * marks, sizes, obstacles, clearance=_CLEARANCE_PT)
    return Scene(turn, marks, leaves, tips, names, labels, sizes)


def _boxes(centres: FloatArray, size: float) -> FloatArray:
    return np.concatenate([centres, np.full((len(centres), 2), size)], axis=1)


def _corners(centres: FloatArray, size: float | FloatArray) -> FloatArray:
    return np.concatenate([centres - np.asarray(size) / 2, centres + np.asarray(size) / 2])


def _front(momentum: Momentum, turn: FloatArray) -> FloatArray:
    """The image nearest to the viewer, in the plane; ties go to the right, then up."""
    seen = np.round(momentum.images @ turn.T, 9)
    depth = seen[:, 2] if seen.shape[1] == 3 else np.zeros(len(seen))
    return np.asarray(seen[np.lexsort((seen[:, 1], seen[:, 0], depth))[-1], :2])
