"""The direct gap over a plane of k: the darker, the smaller, with the minimum marked."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from topovet.arrays import FloatArray
from topovet.model.crystal import Crystal
from topovet.notation import ev, fraction, k_text, significant
from topovet.report.figures import palette
from topovet.report.figures.canvas import bare, drawing, new_figure, to_svg
from topovet.report.figures.surface import lightness_ramp
from topovet.spectrum.results import GapMap

if TYPE_CHECKING:
    from matplotlib.axes import Axes

STEPS = 8
"""Height lines between the smallest and the largest gap, evenly spaced in the logarithm."""

LEAST_EV = 1e-4
"""Smaller gaps share the darkest shade."""

SUBSCRIPTS = "₁₂₃"


def gap_map_figure(found: GapMap, crystal: Crystal, *, name: str = "gap-map") -> str:
    """Height lines of the direct gap in one reciprocal cell of the plane, as SVG text.

    Parameters
    ----------
    found
        Gaps in eV.
    crystal
        Its reciprocal lattice gives the shape of the cell.
    name
        Prefix of ids.
    """
    points, minimum = _in_plane(found, crystal)
    low = float(found.gap_ev.min())
    levels = np.geomspace(max(low, LEAST_EV), float(found.gap_ev.max()) * 1.0001, STEPS + 1)
    with drawing(name):
        figure = new_figure(5.2, 4.4)
        axes = figure.add_subplot()
        bare(axes)
        axes.set_aspect("equal")
        shades = lightness_ramp(STEPS + 1)[:0:-1]
        drawn = axes.contourf(
            points[..., 0], points[..., 1], found.gap_ev, levels=levels, colors=shades
        )
        drawn.set_edgecolor("face")
        _draw_marks(axes, found, crystal, minimum)
        scale = figure.colorbar(drawn, ax=axes, shrink=0.8, pad=0.02)
        scale.set_label("direct gap  (meV)")
        scale.set_ticks(levels.tolist(), labels=[significant(1000 * x, 2) for x in levels])
        scale.ax.tick_params(length=0, which="both")
        scale.outline.set_visible(False)
        axes.set_xlabel("k in the plane  (1/Å)")
        axes.set_ylabel("k in the plane, across  (1/Å)")
        return to_svg(figure, name, title="Direct gap over a plane of k", description=_words(found))


def _frame(found: GapMap, crystal: Crystal) -> FloatArray:
    """(2, 3) unit vectors: along the first reciprocal vector of the plane, and across."""
    i, j = (a for a in range(3) if a != found.axis)
    first, second = crystal.reciprocal[i], crystal.reciprocal[j]
    along = first / np.linalg.norm(first)
    across = second - (second @ along) * along
    return np.array([along, across / np.linalg.norm(across)])


def _in_plane(found: GapMap, crystal: Crystal) -> tuple[FloatArray, FloatArray]:
    """Mesh (n_u, n_v, 2) and minimum (2,) in 1/angstrom from the middle of what is shown."""
    i, j = (a for a in range(3) if a != found.axis)
    vectors = crystal.reciprocal[[i, j]] @ _frame(found, crystal).T
    middle = _middle(found)
    u, v = np.meshgrid(found.u_frac - middle[0], found.v_frac - middle[1], indexing="ij")
    at = np.array([found.minimum_frac[i], found.minimum_frac[j]])
    return u[..., None] * vectors[0] + v[..., None] * vectors[1], (at - middle) @ vectors


def _middle(found: GapMap) -> FloatArray:
    """(2,) fractional components in the middle of the map."""
    return np.array([found.u_frac[[0, -1]].mean(), found.v_frac[[0, -1]].mean()])


def _draw_marks(axes: Axes, found: GapMap, crystal: Crystal, minimum: FloatArray) -> None:
    """The minimum, and the time-reversal-invariant momenta of a plane that holds some."""
    if abs(2 * found.fixed_frac - round(2 * found.fixed_frac)) < 1e-6:
        i, j = (a for a in range(3) if a != found.axis)
        vectors = crystal.reciprocal[[i, j]] @ _frame(found, crystal).T
        half = np.array([(a, b) for a in (-0.5, 0.0, 0.5) for b in (-0.5, 0.0, 0.5)]) @ vectors
        axes.plot(
            half[:, 0],
            half[:, 1],
            linestyle="none",
            marker="s",
            markersize=4,
            markerfacecolor=palette.WHITE,
            markeredgecolor=palette.INK,
            markeredgewidth=0.8,
            clip_on=False,
        )
    axes.plot(
        *minimum, marker="x", markersize=9, markeredgewidth=2.6, color=palette.WHITE, clip_on=False
    )
    axes.plot(
        *minimum, marker="x", markersize=8, markeredgewidth=1.4, color=palette.ODD, clip_on=False
    )


def _words(found: GapMap) -> str:
    plane = f"k{SUBSCRIPTS[found.axis]} = {fraction(found.fixed_frac)}"
    return (
        f"Direct gap over the plane {plane}, one reciprocal cell about "
        f"{middle_text(found)}, from "
        f"{ev(float(found.gap_ev.min()))} to {ev(float(found.gap_ev.max()))} on a mesh of "
        f"{len(found.u_frac)} by {len(found.v_frac)} points; the smallest that was met lies at "
        f"k = {k_text(found.minimum_frac)}."
    )


def middle_text(found: GapMap) -> str:
    """The middle of the map as a fractional k."""
    middle = _middle(found).tolist()
    middle.insert(found.axis, found.fixed_frac)
    return k_text(middle)
