"""The Brillouin zone with the nodes of a semimetal: chirality by sign and filling, lines drawn."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.invariants.nodes.results import NodeSearch, PointNode
from topovet.model.crystal import Crystal
from topovet.notation import k_text
from topovet.report.figures import palette
from topovet.report.figures.canvas import drawing, new_figure, to_svg
from topovet.report.figures.labels import place_labels
from topovet.report.figures.wigner_seitz import Zone, brillouin_zone, nearest_images
from topovet.report.figures.zone import draw_polygon, draw_solid
from topovet.report.figures.zone_scene import (
    POINTS_PER_RADIUS,
    periodic_reciprocal,
    view,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_MARK_PT = 13.0
_LABEL_PT = 9.0
_MARGIN_PT = 16.0
_REACH = 0.28
_MOST_LABELS = 16
_JUMP = 0.1
"""Steps of a line longer than this, in zone radii, are where it leaves the zone."""

_BACKING: dict[str, Any] = {
    "facecolor": palette.WHITE,
    "alpha": 0.85,
    "edgecolor": "none",
    "pad": 0.6,
}


def nodes_figure(crystal: Crystal, nodes: NodeSearch, *, name: str = "nodes") -> str:
    """The first Brillouin zone with its nodes and nodal lines as SVG text.

    Parameters
    ----------
    crystal
        Its cell (angstrom) and periodic directions fix the zone.
    nodes
        What was found; all images of the lines are drawn.
    name
        Prefix of ids; differs between figures of one page.
    """
    reciprocal, axis_names = periodic_reciprocal(crystal)
    periodic = np.flatnonzero(crystal.periodic)
    zone = brillouin_zone(reciprocal)
    places = [_in_zone(np.array(p.k)[periodic], reciprocal) / zone.radius for p in nodes.points]
    curves = [c / zone.radius for c in _curves(nodes, reciprocal, periodic, zone.radius)]
    turn = _best_view(zone, places)
    marks = np.array([place @ turn[:2].T for place in places]).reshape(-1, 2)
    leaves, tips = _axes_ends(zone, reciprocal, turn)
    outline = np.concatenate([zone.vertices @ turn[:2].T / zone.radius, 1.08 * tips, marks])
    low = POINTS_PER_RADIUS * outline.min(axis=0) - _MARGIN_PT
    high = POINTS_PER_RADIUS * outline.max(axis=0) + _MARGIN_PT
    with drawing(name):
        figure = new_figure(*((high - low) / 72), layout=None)
        axes = figure.add_axes((0.0, 0.0, 1.0, 1.0))
        axes.set_axis_off()
        axes.set_xlim(low[0] / POINTS_PER_RADIUS, high[0] / POINTS_PER_RADIUS)
        axes.set_ylim(low[1] / POINTS_PER_RADIUS, high[1] / POINTS_PER_RADIUS)
        if zone.faces:
            draw_solid(axes, zone, turn)
        else:
            draw_polygon(axes, zone)
        _draw_axes(axes, leaves, tips, axis_names)
        _draw_centre(axes)
        for curve in curves:
            axes.plot(*(curve @ turn[:2].T).T, color=palette.EMPTY, linewidth=2.2, zorder=4)
        _draw_stems(axes, places, turn)
        _draw_points(axes, nodes.points, marks)
        _draw_numbers(axes, nodes.points, marks)
        return to_svg(figure, name, title="Nodes in the Brillouin zone", description=_words(nodes))


def _in_zone(k_frac: FloatArray, reciprocal: FloatArray) -> FloatArray:
    """(d,) 1/angstrom: of the images in the zone, the one nearest to k as listed."""
    images = nearest_images(k_frac @ reciprocal, reciprocal)
    away = np.linalg.norm(images - k_frac @ reciprocal, axis=1)
    return np.asarray(images[int(away.argmin())])


def _curves(
    nodes: NodeSearch, reciprocal: FloatArray, periodic: IntArray, radius: float
) -> list[FloatArray]:
    """(n, d) pieces of all lines within the zone, 1/angstrom."""
    pieces = []
    drawn: list[FloatArray] = []
    for line in nodes.lines:
        closing = [line.k_frac[:1] + line.winding] if line.closed else []
        whole = np.concatenate([line.k_frac, *closing])
        for image in nodes.images:
            turned = (whole @ image)[:, periodic]
            points = np.array([_in_zone(k, reciprocal) for k in turned])
            if any(_same_curve(points, other, radius) for other in drawn):
                continue
            drawn.append(points)
            steps = np.linalg.norm(np.diff(points, axis=0), axis=1)
            cuts = np.flatnonzero(steps > _JUMP * radius) + 1
            pieces += [part for part in np.split(points, cuts) if len(part) > 1]
    return pieces


def _same_curve(points: FloatArray, other: FloatArray, radius: float) -> bool:
    probe = points[len(points) // 3]
    return bool(np.linalg.norm(other - probe, axis=1).min() < 0.02 * radius)


def _best_view(zone: Zone, places: Sequence[FloatArray]) -> FloatArray:
    """The view, of a fixed set, in which marks stand apart and no face is seen edge-on."""
    if not zone.faces:
        return np.eye(2)

    def merit(turn: FloatArray) -> float:
        face = min(np.abs(zone.normals @ turn[2]).min(), 0.12)
        marks = np.array([place @ turn[:2].T for place in places]).reshape(-1, 2)
        apart = np.linalg.norm(marks[:, None] - marks[None], axis=2)
        np.fill_diagonal(apart, np.inf)
        nearest = np.minimum(apart.min(axis=1, initial=np.inf), 0.25) if len(marks) > 1 else [0.25]
        return round(float(np.mean(nearest) + np.min(nearest) + 2 * face), 6)

    views = [view(a, e) for e in (14, 20, 26, 32) for a in range(0, 360, 12)]
    return max(views, key=merit)


def _axes_ends(
    zone: Zone, reciprocal: FloatArray, turn: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """(d, 2) where each axis leaves the zone, and its tip, in zone radii."""
    directions = reciprocal / np.linalg.norm(reciprocal, axis=1)[:, None]
    reach = np.array([zone.exit_distance(d) for d in directions])[:, None] / zone.radius
    flat = directions @ turn[:2].T
    return reach * flat, (reach + _REACH) * flat


def _draw_axes(axes: Axes, leaves: FloatArray, tips: FloatArray, names: Sequence[str]) -> None:
    for leave, tip, name in zip(leaves, tips, names, strict=True):
        axes.plot(
            [0, leave[0]], [0, leave[1]], color=palette.MUTED, lw=0.8, linestyle=":", zorder=2
        )
        axes.annotate(
            "",
            (float(tip[0]), float(tip[1])),
            (float(leave[0]), float(leave[1])),
            arrowprops={"arrowstyle": "-|>", "color": palette.MUTED, "shrinkA": 0, "shrinkB": 0},
            zorder=3.5,
        )
        style: dict[str, Any] = {"color": palette.MUTED, "fontstyle": "italic", "fontsize": 11}
        _write(axes, 1.08 * tip, name, bbox=_BACKING, zorder=4, **style)


def _draw_centre(axes: Axes) -> None:
    axes.plot([0], [0], "o", markersize=3.5, color=palette.MUTED, zorder=3)
    _write(axes, np.array([-0.08, 0.035]), "Γ", color=palette.MUTED, fontsize=9.5, zorder=3)


def _draw_stems(axes: Axes, places: Sequence[FloatArray], turn: FloatArray) -> None:
    """From each node straight to the horizontal plane through the centre: how high it lies."""
    for place in places:
        if len(place) < 3 or abs(place[2]) < 0.02:
            continue
        foot = place * np.array([1.0, 1.0, 0.0])
        ends = np.array([foot, place]) @ turn[:2].T
        axes.plot(*ends.T, color=palette.INK, linewidth=0.7, linestyle=(0, (2, 2)), zorder=3.8)
        axes.plot(*ends[:1].T, "o", markersize=2.2, color=palette.INK, zorder=3.8)


def _draw_points(axes: Axes, points: Sequence[PointNode], marks: FloatArray) -> None:
    for point, place in zip(points, marks, strict=True):
        style, sign, ink = _mark(point)
        axes.plot(*place, markersize=_MARK_PT, markeredgewidth=1.6, zorder=5, **style)
        if sign:
            size = 11 if len(sign) == 1 else 8.5
            _write(axes, place, sign, fontsize=size, fontweight="bold", color=ink, zorder=6)


def _mark(point: PointNode) -> tuple[dict[str, Any], str, str]:
    """Marker, what stands in it, and the ink of that."""
    if point.charge:
        size = "" if abs(point.charge) == 1 else str(abs(point.charge))
        if point.charge > 0:
            face, ring, ink, sign = palette.WHITE, palette.FILLED, palette.FILLED, "+"
        else:
            face, ring, ink, sign = palette.ODD, palette.ODD, palette.WHITE, "−"
        style = {"marker": "o", "markerfacecolor": face, "markeredgecolor": ring}
        return style, sign + size, ink
    if point.kind in ("dirac", "multifold"):
        style = {"marker": "D", "markerfacecolor": palette.GAP_TINT}
        return style | {"markeredgecolor": palette.INK}, str(point.multiplicity), palette.INK
    style = {"marker": "s", "markerfacecolor": palette.RULE, "markeredgecolor": palette.MUTED}
    return style, "?", palette.INK


def _draw_numbers(axes: Axes, points: Sequence[PointNode], marks: FloatArray) -> None:
    """Each orbit's number beside its points; one beside the first alone where they are many."""
    chosen = list(range(len(points)))
    if len(points) > _MOST_LABELS:
        orbits = itertools.groupby(chosen, key=lambda i: points[i].orbit)
        chosen = [next(members) for _, members in orbits]
    texts = [f"{points[i].orbit + 1}" for i in chosen]
    anchors = POINTS_PER_RADIUS * marks
    sizes = np.array([(6.0 * len(text), 10.0) for text in texts]).reshape(-1, 2)
    boxes = np.concatenate([anchors, np.full((len(anchors), 2), _MARK_PT)], axis=1)
    placed = place_labels(anchors[chosen], sizes, boxes, clearance=_MARK_PT / 2 + 2)
    for centre, text in zip(placed.centres, texts, strict=True):
        at = centre / POINTS_PER_RADIUS
        _write(axes, at, text, fontsize=_LABEL_PT, color=palette.INK, bbox=_BACKING, zorder=5.5)


def _write(axes: Axes, at: FloatArray, text: str, **style: Any) -> None:
    axes.text(float(at[0]), float(at[1]), text, ha="center", va="center", **style)


def _words(nodes: NodeSearch) -> str:
    listed = "; ".join(
        f"{k_text(p.k)}: {p.kind}" + (f", chirality {p.charge:+d}" if p.charge else "")
        for p in nodes.points
    )
    n_lines = sum(line.n_images for line in nodes.lines)
    lines = f" Nodal lines: {n_lines}." if n_lines else ""
    return (
        f"First Brillouin zone with the places where filled and empty bands touch. {listed}.{lines}"
    )
