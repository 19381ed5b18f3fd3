"""The Brillouin zone with its time-reversal-invariant momenta and their signs."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from topovet.arrays import FloatArray
from topovet.invariants.results import TrimParity
from topovet.model.crystal import Crystal
from topovet.report.figures import palette
from topovet.report.figures.canvas import drawing, new_figure, to_svg
from topovet.report.figures.labels import Placement, place_labels
from topovet.report.figures.wigner_seitz import Zone, brillouin_zone, nearest_images
from topovet.report.notation import k_text, significant

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_POINTS_PER_RADIUS = 118.0
_MARGIN_PT = 5.0
_REACH = 0.3
"""How far the axes reach out of the zone, in zone radii."""
_MARK_PT = 13.0
_LABEL_PT = 8.5
_NAME_PT = 15.0
_CLEARANCE_PT = 9.0
_BACKING = {"facecolor": palette.WHITE, "alpha": 0.9, "edgecolor": "none", "pad": 0.8}
"""Behind text, so that no line strikes it through."""


@dataclass(frozen=True, slots=True, eq=False)
class _Momentum:
    """A TRIM as drawn: fractional k, images on the zone (1/angstrom), sign or None."""

    k: tuple[float, float, float]
    images: FloatArray
    delta: int | None

    @property
    def label(self) -> str:
        return f"Γ {k_text(self.k)}" if not any(self.k) else k_text(self.k)


@dataclass(frozen=True, slots=True, eq=False)
class _Scene:
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
                _corners(_POINTS_PER_RADIUS * outline, 2.0),
                _corners(_POINTS_PER_RADIUS * self.marks, _MARK_PT),
                _corners(_POINTS_PER_RADIUS * self.names, _NAME_PT),
                _corners(self.labels.centres, self.sizes),
            ]
        )
        return np.array([reach.min(axis=0) - _MARGIN_PT, reach.max(axis=0) + _MARGIN_PT])


def zone_figure(crystal: Crystal, trim: Sequence[TrimParity] = (), *, name: str = "zone") -> str:
    """The first Brillouin zone as SVG text, a TRIM's sign beside its fractional k.

    Parameters
    ----------
    crystal
        Its cell (angstrom) and periodic directions fix the zone.
    trim
        Gives the sign at each TRIM; a TRIM that is missing here is drawn without sign.
    name
        Prefix of ids; differs between figures of one page.
    """
    reciprocal, axis_names = periodic_reciprocal(crystal)
    zone = brillouin_zone(reciprocal)
    momenta = _momenta(crystal, reciprocal, trim)
    scene = _best_scene(zone, reciprocal, momenta)
    with drawing(name):
        low, high = scene.extent(zone.vertices @ scene.turn[:2].T / zone.radius)
        figure = new_figure(*((high - low) / 72), layout="none")
        axes = figure.add_axes((0.0, 0.0, 1.0, 1.0))
        axes.set_axis_off()
        axes.set_xlim(low[0] / _POINTS_PER_RADIUS, high[0] / _POINTS_PER_RADIUS)
        axes.set_ylim(low[1] / _POINTS_PER_RADIUS, high[1] / _POINTS_PER_RADIUS)
        if zone.faces:
            _draw_solid(axes, zone, scene.turn)
        else:
            _draw_polygon(axes, zone)
        _draw_axes(axes, scene, axis_names)
        _draw_momenta(axes, scene, momenta)
        words = _words(zone, momenta)
        return to_svg(figure, name, title="Brillouin zone", description=words)


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


def _momenta(
    crystal: Crystal, reciprocal: FloatArray, trim: Sequence[TrimParity]
) -> list[_Momentum]:
    signs = {tuple(np.round(2 * np.asarray(t.k)).astype(int) % 2): t.delta for t in trim}
    momenta = []
    for half in itertools.product(*((0, 1) if periodic else (0,) for periodic in crystal.periodic)):
        within = np.array([h / 2 for h, p in zip(half, crystal.periodic, strict=True) if p])
        k = (half[0] / 2, half[1] / 2, half[2] / 2)
        images = nearest_images(within @ reciprocal, reciprocal)
        momenta.append(_Momentum(k, images, signs.get(half)))
    return momenta


def _best_scene(zone: Zone, reciprocal: FloatArray, momenta: Sequence[_Momentum]) -> _Scene:
    """The scene, of a fixed set of views, with the least overlap and the best-separated marks."""
    if not zone.faces:
        return _scene(zone, reciprocal, momenta, np.eye(2))
    views = [_view(a, e) for e in (14, 20, 26, 32) for a in range(0, 360, 12)]
    scenes = [_scene(zone, reciprocal, momenta, turn) for turn in views]
    return min(scenes, key=_crowding)


def _crowding(scene: _Scene) -> float:
    """Overlap of labels in square points, plus a penalty for marks or axes that nearly coincide."""
    apart = np.linalg.norm(scene.marks[:, None] - scene.marks[None], axis=2)
    np.fill_diagonal(apart, np.inf)
    axis = np.linalg.norm(scene.tips - scene.leaves, axis=1).min()
    return float(round(scene.labels.overlap - 400 * min(apart.min(), 0.4) - 300 * min(axis, 0.2), 3))


def _view(azimuth: float, elevation: float) -> FloatArray:
    ca, sa = np.cos(np.radians(azimuth)), np.sin(np.radians(azimuth))
    ce, se = np.cos(np.radians(elevation)), np.sin(np.radians(elevation))
    return np.array([[-sa, ca, 0.0], [-se * ca, -se * sa, ce], [ce * ca, ce * sa, se]])


def _scene(
    zone: Zone, reciprocal: FloatArray, momenta: Sequence[_Momentum], turn: FloatArray
) -> _Scene:
    marks = np.array([_front(m, turn) for m in momenta]) / zone.radius
    directions = reciprocal / np.linalg.norm(reciprocal, axis=1)[:, None]
    reach = np.array([zone.exit_distance(d) for d in directions])[:, None] / zone.radius
    flat = directions @ turn[:2].T
    leaves, tips = reach * flat, (reach + _REACH) * flat
    names = tips * (1 + 0.1 / np.maximum(np.linalg.norm(tips, axis=1), 0.1))[:, None]
    sizes = np.array([(5.0 * len(m.label), 10.0) for m in momenta])
    along = [leaves + s * (tips - leaves) for s in (0.2, 0.4, 0.6, 0.8, 1.0)]
    points = _POINTS_PER_RADIUS
    obstacles = np.concatenate(
        [_boxes(points * marks, _MARK_PT), _boxes(points * names, _NAME_PT)]
        + [_boxes(points * place, 4.0) for place in along]
    )
    labels = place_labels(points * marks, sizes, obstacles, clearance=_CLEARANCE_PT)
    return _Scene(turn, marks, leaves, tips, names, labels, sizes)


def _boxes(centres: FloatArray, size: float) -> FloatArray:
    return np.concatenate([centres, np.full((len(centres), 2), size)], axis=1)


def _corners(centres: FloatArray, size: float | FloatArray) -> FloatArray:
    return np.concatenate([centres - np.asarray(size) / 2, centres + np.asarray(size) / 2])


def _front(momentum: _Momentum, turn: FloatArray) -> FloatArray:
    """The image nearest to the viewer, in the plane; ties go to the right, then up."""
    seen = np.round(momentum.images @ turn.T, 9)
    depth = seen[:, 2] if seen.shape[1] == 3 else np.zeros(len(seen))
    return np.asarray(seen[np.lexsort((seen[:, 1], seen[:, 0], depth))[-1], :2])


def _draw_solid(axes: Axes, zone: Zone, turn: FloatArray) -> None:
    flat = zone.vertices @ turn[:2].T / zone.radius
    facing = zone.normals @ turn[2] > 1e-9
    for face, front in zip(zone.faces, facing, strict=True):
        if front:
            axes.fill(*flat[face].T, color=palette.FACE_TINT, linewidth=0, zorder=1)
    for a, b, sides in zone.edges():
        seen = any(facing[s] for s in sides)
        axes.plot(
            *flat[[a, b]].T,
            color=palette.INK if seen else palette.MUTED,
            linewidth=1.3 if seen else 0.7,
            linestyle="-" if seen else (0, (4, 3)),
            zorder=3 if seen else 1.5,
        )


def _draw_polygon(axes: Axes, zone: Zone) -> None:
    axes.fill(
        *zone.vertices.T / zone.radius,
        facecolor=palette.FACE_TINT,
        edgecolor=palette.INK,
        linewidth=1.3,
        zorder=1,
    )


def _draw_axes(axes: Axes, scene: _Scene, names: Sequence[str]) -> None:
    """Arrows along the reciprocal vectors, from the surface of the zone outwards."""
    for leaves, tip, at, name in zip(scene.leaves, scene.tips, scene.names, names, strict=True):
        inside = {"color": palette.MUTED, "linewidth": 0.8, "linestyle": ":", "zorder": 2}
        axes.plot([0, leaves[0]], [0, leaves[1]], **inside)
        axes.annotate(
            "",
            (float(tip[0]), float(tip[1])),
            (float(leaves[0]), float(leaves[1])),
            arrowprops={"arrowstyle": "-|>", "color": palette.MUTED, "shrinkA": 0, "shrinkB": 0},
            zorder=3.5,
        )
        style = {"color": palette.MUTED, "fontstyle": "italic", "fontsize": 11, "zorder": 4}
        axes.text(at[0], at[1], name, ha="center", va="center", bbox=_BACKING, **style)


def _draw_momenta(axes: Axes, scene: _Scene, momenta: Sequence[_Momentum]) -> None:
    for momentum, place, label in zip(momenta, scene.marks, scene.labels.centres, strict=True):
        ring, face, ink = {
            1: (palette.FILLED, palette.WHITE, palette.FILLED),
            -1: (palette.ODD, palette.ODD, palette.WHITE),
            None: (palette.MUTED, palette.WHITE, palette.MUTED),
        }[momentum.delta]
        colours = {"markerfacecolor": face, "markeredgecolor": ring, "markeredgewidth": 1.5}
        axes.plot(*place, "o", markersize=_MARK_PT, zorder=5, **colours)
        sign = {1: "+", -1: "−", None: "?"}[momentum.delta]
        bold = {"fontsize": 11, "fontweight": "bold", "color": ink, "zorder": 6}
        axes.text(*place, sign, ha="center", va="center_baseline", **bold)
        axes.text(
            *label / _POINTS_PER_RADIUS,
            momentum.label,
            ha="center",
            va="center",
            fontsize=_LABEL_PT,
            zorder=5.5,
            bbox=_BACKING,
        )


def _words(zone: Zone, momenta: Sequence[_Momentum]) -> str:
    signs = {1: "plus", -1: "minus", None: "no sign"}
    listed = "; ".join(f"{k_text(m.k)}: {signs[m.delta]}" for m in momenta)
    shape = f"{len(zone.faces)} faces" if zone.faces else f"{len(zone.vertices)} sides"
    return (
        f"First Brillouin zone with {shape}, {significant(zone.radius)} per angstrom from the "
        f"centre to the farthest corner. Sign at each TRIM, fractional k: {listed}."
    )
