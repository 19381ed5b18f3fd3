"""The gap from A to B: attained, proved, closed; and the levels that change places at the TRIM."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from topovet.arrays import FloatArray
from topovet.deformation.conclusion import side_text
from topovet.deformation.results import Closing, ProvedStretch, TrimLevels, Walk
from topovet.notation import k_text
from topovet.report.deformation.material import DeformationMaterial
from topovet.report.figures import palette
from topovet.report.figures.canvas import bare, drawing, new_figure, to_svg
from topovet.report.figures.parity_marks import Mark, draw_parities, legend_marks

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

MOST_PANELS = 3
NARROW = 0.09
"""Segments of lambda that are too short for their indices to be written over them."""

MARKED = np.array([0.0, 0.25, 0.5, 0.75, 1.0])
"""Values of lambda at which levels carry their parity."""

_LEAST_WINDOW_EV = 0.05


def deformation_figure(material: DeformationMaterial, *, name: str = "deform") -> str:
    """Smallest direct gap against lambda, above the levels at the TRIM, as SVG text."""
    made = material.walk
    shown = _distinct(made)
    with drawing(name):
        figure = new_figure(7.8, 6.4 if shown else 3.3)
        if shown:
            halves = figure.subfigures(2, 1, squeeze=False, height_ratios=(3.2, 3.2))
            top, bottom = halves[0, 0], halves[1, 0]
            panels = bottom.subplots(1, len(shown), squeeze=False, sharey=False)[0]
            for axes, (levels, others) in zip(panels, shown, strict=True):
                _draw_levels(axes, levels, others)
            panels[0].set_ylabel("E − middle of the gap  (eV)")
            kinds = {"even", "odd"}
            handles, labels = zip(*legend_marks(kinds), strict=True)
            bottom.legend(handles, labels, loc="outside upper right", ncols=2, frameon=False)
        else:
            top = figure.subfigures(1, 1, squeeze=False)[0, 0]
        _draw_gap(top.subplots(), made)
        top.legend(handles=_handles(made), loc="outside upper left", ncols=2, frameon=False)
        return to_svg(figure, name, title="From A to B", description=_words(material))


def _draw_gap(axes: Axes, made: Walk) -> None:
    bare(axes)
    axes.set_xlim(0, 1)
    lams = np.array([s.lam for s in made.samples])
    gaps = np.array([s.gap_ev for s in made.samples])
    high = 1.32 * float(gaps.max())
    axes.set_ylim(0, high)
    axes.set_xlabel("λ   (0: A, 1: B)")
    axes.set_ylabel("smallest direct gap  (eV)")
    for edges, bounds in _proved_runs(made.stretches):
        axes.stairs(bounds, edges, fill=True, color=palette.FILLED, alpha=0.28, lw=0, zorder=1)
    axes.plot(lams, gaps, color=palette.FILLED, linewidth=1.3, zorder=3)
    apart = _apart(lams)
    axes.plot(lams[apart], gaps[apart], "o", markersize=3.4, color=palette.FILLED, zorder=3)
    for closing in made.closings:
        _draw_closing(axes, closing, high)
    for segment in made.segments:
        if segment.hi - segment.lo >= NARROW:
            axes.text(
                (segment.lo + segment.hi) / 2,
                0.985 * high,
                side_text(segment).replace(", ", "\n"),
                ha="center",
                va="top",
                fontsize=9.5,
                color=palette.INK,
                zorder=5,
            )


def _draw_closing(axes: Axes, closing: Closing, high: float) -> None:
    if closing.kind == "interval":
        axes.axvspan(closing.lo, closing.hi, facecolor=palette.GAP_TINT, linewidth=0, zorder=0.5)
        for edge in (closing.lo, closing.hi):
            axes.axvline(edge, color=palette.ODD, linewidth=0.9, linestyle=(0, (5, 3)))
        label = f"gapless\n{closing.lo:.3f} to {closing.hi:.3f}"
    else:
        axes.axvline(closing.lam, color=palette.ODD, linewidth=0.9, linestyle=(0, (5, 3)))
        label = f"λ = {closing.lam:.4f}\nk = {k_text(closing.k)}"
    left = closing.hi > 0.75
    axes.annotate(
        label,
        (closing.lo if left else closing.hi, 0.62 * high),
        xytext=(-5 if left else 5, 0),
        textcoords="offset points",
        ha="right" if left else "left",
        va="center",
        fontsize=8.5,
        color=palette.ODD,
        zorder=5,
    )


def _handles(made: Walk) -> list[Line2D | Patch]:
    """Entries of the legend."""
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    handles: list[Line2D | Patch] = [
        Line2D([], [], color=palette.FILLED, marker="o", markersize=3.4, label="attained")
    ]
    if made.stretches:
        handles.append(
            Patch(facecolor=palette.FILLED, alpha=0.28, label="proved: no k has a smaller gap")
        )
    return handles


def _draw_levels(axes: Axes, levels: TrimLevels, others: int) -> None:
    bare(axes)
    lams = np.asarray(levels.lams)
    edges = np.asarray(levels.edges_ev)
    middle = edges.mean(axis=1)
    half = max(_LEAST_WINDOW_EV, 1.6 * float((edges[:, 1] - edges[:, 0]).max()))
    marks: list[Mark] = []
    styles = (
        ("even", levels.even_ev, palette.FILLED, "-"),
        ("odd", levels.odd_ev, palette.ODD, "--"),
    )
    for kind, energies, colour, style in styles:
        for level in _single_levels(np.asarray(energies) - middle[:, None]):
            if np.abs(level).min() > half:
                continue
            axes.plot(lams, level, style, color=colour, linewidth=1.0, zorder=2)
            at = np.interp(MARKED, lams, level)
            marks += [
                Mark(float(x), float(e), kind)
                for x, e in zip(MARKED, at, strict=True)
                if abs(e) <= half
            ]
    axes.set_xlim(0, 1)
    axes.set_ylim(-half, half)
    axes.axhline(0, color=palette.RULE, linewidth=0.8, zorder=1)
    draw_parities(axes, marks)
    axes.set_xlabel("λ")
    more = f" and {others} more" if others else ""
    axes.set_title(f"k = {k_text(levels.k)}{more}", fontsize=9.5, loc="left")


def _single_levels(energies: FloatArray) -> list[FloatArray]:
    """Columns (n,) of a stack of levels, those that coincide throughout taken once."""
    kept: list[FloatArray] = []
    for column in energies.T:
        if not kept or np.abs(column - kept[-1]).max() > 1e-6:
            kept.append(column)
    return kept


def _proved_runs(stretches: Sequence[ProvedStretch]) -> list[tuple[list[float], list[float]]]:
    """Edges (n + 1,) and bounds (n,) of runs of stretches that touch."""
    runs: list[tuple[list[float], list[float]]] = []
    for stretch in stretches:
        if stretch.proved_min_ev <= 0:
            continue
        if not runs or abs(runs[-1][0][-1] - stretch.lo) > 1e-12:
            runs.append(([stretch.lo], []))
        runs[-1][0].append(stretch.hi)
        runs[-1][1].append(stretch.proved_min_ev)
    return runs


def _apart(lams: FloatArray) -> list[int]:
    """Samples to mark: those that do not sit on one another."""
    kept: list[int] = []
    for i, lam in enumerate(lams.tolist()):
        if not kept or lam - lams[kept[-1]] > 0.004:
            kept.append(i)
    return kept


def _distinct(made: Walk) -> list[tuple[TrimLevels, int]]:
    """Panels: one for TRIM that exchange at the same lambda, with the number of the others."""
    at = {
        levels.k: sorted(round(e.lam, 6) for e in made.exchanges if e.k == levels.k)
        for levels in made.levels
    }
    chosen: list[tuple[TrimLevels, int]] = []
    for levels in made.levels:
        same = [i for i, (other, _) in enumerate(chosen) if at[other.k] == at[levels.k]]
        if same and at[levels.k]:
            chosen[same[0]] = (chosen[same[0]][0], chosen[same[0]][1] + 1)
        else:
            chosen.append((levels, 0))
    return chosen[:MOST_PANELS]


def _words(material: DeformationMaterial) -> str:
    made = material.walk
    gaps = [s.gap_ev for s in made.samples]
    closed = "; ".join(
        f"closed from λ = {c.lo:.4f} to {c.hi:.4f}"
        if c.kind == "interval"
        else f"closed at λ = {c.lam:.4f}"
        for c in made.closings
    )
    return (
        f"Smallest direct gap attained along λ from {gaps[0]:.3f} eV at A to "
        f"{gaps[-1]:.3f} eV at B; {closed or 'no closing met'}; proved open over "
        f"{100 * made.proved_share:.1f} percent. {material.conclusion.sentence}"
    )
