"""The Brillouin zone with its time-reversal-invariant momenta and their signs."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from topovet.arrays import FloatArray
from topovet.invariants.results import TrimParity
from topovet.model.crystal import Crystal
from topovet.notation import k_text, significant
from topovet.report.figures import palette
from topovet.report.figures.canvas import drawing, new_figure, to_svg
from topovet.report.figures.wigner_seitz import Zone, brillouin_zone
from topovet.report.figures.zone_scene import (
    MARK_PT,
    POINTS_PER_RADIUS,
    Momentum,
    Scene,
    best_scene,
    momenta_of,
    periodic_reciprocal,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes

_LABEL_PT = 8.5
_BACKING: dict[str, Any] = {
    "facecolor": palette.WHITE,
    "alpha": 0.9,
    "edgecolor": "none",
    "pad": 0.8,
}
"""Behind text, so that no line strikes it through."""


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
    momenta = momenta_of(crystal, reciprocal, trim)
    scene = best_scene(zone, reciprocal, momenta)
    with drawing(name):
        low, high = scene.extent(zone.vertices @ scene.turn[:2].T / zone.radius)
        figure = new_figure(*((high - low) / 72), layout=None)
        axes = figure.add_axes((0.0, 0.0, 1.0, 1.0))
        axes.set_axis_off()
        axes.set_xlim(low[0] / POINTS_PER_RADIUS, high[0] / POINTS_PER_RADIUS)
        axes.set_ylim(low[1] / POINTS_PER_RADIUS, high[1] / POINTS_PER_RADIUS)
        if zone.faces:
            draw_solid(axes, zone, scene.turn)
        else:
            draw_polygon(axes, zone)
        _draw_axes(axes, scene, axis_names)
        _drawmomenta_of(axes, scene, momenta)
        words = _words(zone, momenta)
        return to_svg(figure, name, title="Brillouin zone", description=words)


def draw_solid(axes: Axes, zone: Zone, turn: FloatArray) -> None:
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


def draw_polygon(axes: Axes, zone: Zone) -> None:
    axes.fill(
        *zone.vertices.T / zone.radius,
        facecolor=palette.FACE_TINT,
        edgecolor=palette.INK,
        linewidth=1.3,
        zorder=1,
    )


def _draw_axes(axes: Axes, scene: Scene, names: Sequence[str]) -> None:
    """Arrows along the reciprocal vectors, from the surface of the zone outwards."""
    for leaves, tip, at, name in zip(scene.leaves, scene.tips, scene.names, names, strict=True):
        inside = [0, leaves[0]], [0, leaves[1]]
        axes.plot(*inside, color=palette.MUTED, linewidth=0.8, linestyle=":", zorder=2)
        axes.annotate(
            "",
            (float(tip[0]), float(tip[1])),
            (float(leaves[0]), float(leaves[1])),
            arrowprops={"arrowstyle": "-|>", "color": palette.MUTED, "shrinkA": 0, "shrinkB": 0},
            zorder=3.5,
        )
        style: dict[str, Any] = {"color": palette.MUTED, "fontstyle": "italic", "fontsize": 11}
        _write(axes, at, name, bbox=_BACKING, zorder=4, **style)


def _drawmomenta_of(axes: Axes, scene: Scene, momenta: Sequence[Momentum]) -> None:
    for momentum, place, label in zip(momenta, scene.marks, scene.labels.centres, strict=True):
        ring, face, ink = {
            1: (palette.FILLED, palette.WHITE, palette.FILLED),
            -1: (palette.ODD, palette.ODD, palette.WHITE),
            None: (palette.MUTED, palette.RULE, palette.MUTED),
        }[momentum.delta]
        colours: dict[str, Any] = {
            "markerfacecolor": face,
            "markeredgecolor": ring,
            "markeredgewidth": 1.5,
        }
        size = MARK_PT if momentum.delta else 0.55 * MARK_PT
        axes.plot(*place, "o", markersize=size, zorder=5, **colours)
        sign = {1: "+", -1: "−", None: ""}[momentum.delta]
        _write(axes, place, sign, fontsize=11, fontweight="bold", color=ink, zorder=6)
        at = label / POINTS_PER_RADIUS
        _write(axes, at, momentum.label, fontsize=_LABEL_PT, zorder=5.5, bbox=_BACKING)


def _write(axes: Axes, at: FloatArray, text: str, **style: Any) -> None:
    axes.text(float(at[0]), float(at[1]), text, ha="center", va="center", **style)


def _words(zone: Zone, momenta: Sequence[Momentum]) -> str:
    signs = {1: "plus", -1: "minus", None: "no sign"}
    listed = "; ".join(f"{k_text(m.k)}: {signs[m.delta]}" for m in momenta)
    shape = f"{len(zone.faces)} faces" if zone.faces else f"{len(zone.vertices)} sides"
    return (
        f"First Brillouin zone with {shape}, {significant(zone.radius)} per angstrom from the "
        f"centre to the farthest corner. Sign at each TRIM, fractional k: {listed}."
    )
