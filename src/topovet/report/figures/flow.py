"""Flow of the hybrid Wannier centres over each plane, with the followed gap as a ribbon."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from topovet.arrays import FloatArray
from topovet.invariants.results import WilsonPlane
from topovet.report.figures import palette
from topovet.report.figures.canvas import bare, drawing, new_figure, to_svg

if TYPE_CHECKING:
    from matplotlib.axes import Axes

PANELS_IN_A_ROW = 3


def flow_figure(planes: Sequence[WilsonPlane], *, name: str = "flow") -> str:
    """One panel for each plane as SVG text.

    Thin lines follow the centres from line to line; the ribbon is the largest gap between them,
    the dashed line one of the references whose crossings are counted.

    Parameters
    ----------
    planes
        At least one.
    """
    columns = PANELS_IN_A_ROW  # also for fewer planes: letters keep their size on the page
    rows = -(-len(planes) // columns)
    with drawing(name):
        figure = new_figure(2.75 * columns + 0.4, 2.35 * rows + 0.3)
        panels = figure.subplots(rows, columns, squeeze=False, sharex=True, sharey=True)
        for axes, plane in zip(panels.flat, planes, strict=False):
            _panel(axes, plane)
        for axes in panels.flat[len(planes) :]:
            axes.set_visible(False)
        for axes in panels.flat[max(0, len(planes) - columns) : len(planes)]:
            axes.set_xlabel("k across the lines")
            axes.tick_params(labelbottom=True)
        for axes in panels[:, 0]:
            axes.set_ylabel("centre (periods)")
        return to_svg(
            figure, name, title="Flow of hybrid Wannier centres", description=_words(planes)
        )


def _panel(axes: Axes, plane: WilsonPlane) -> None:
    from matplotlib.collections import LineCollection

    bare(axes)
    across = np.asarray(plane.flow_across)
    axes.set_xlim(across[0], across[-1])
    axes.set_ylim(0, 1)
    axes.set_xticks([0, 0.25, 0.5], ["0", "¼", "½"])
    axes.set_yticks([0, 0.5, 1], ["0", "½", "1"])
    axes.bar(*_ribbon(plane), align="edge", color=palette.GAP_TINT, linewidth=0, zorder=0.5)
    axes.add_collection(
        LineCollection(list(_segments(plane)), colors=palette.FILLED, linewidths=0.8, zorder=2)
    )
    if len(plane.references):
        axes.axhline(plane.references[0], color=palette.ODD, linewidth=0.8, linestyle=(0, (5, 3)))
    axes.set_title(f"{plane.plane.replace('=', ' = ')}: {_result(plane)}", fontsize=9.5)


def _result(plane: WilsonPlane) -> str:
    if plane.z2 is None:
        return plane.status
    crossed = f", reference crossed {int(plane.crossings[0])}×" if len(plane.crossings) else ""
    return f"Z₂ = {plane.z2}{crossed}"


def _ribbon(plane: WilsonPlane) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Left edge, height, width and bottom of the bars that shade the followed gap."""
    across, centres = np.asarray(plane.flow_across), np.asarray(plane.flow_hwcc)
    middle = np.asarray(plane.gap_centres)
    away = (centres - middle[:, None] + 0.5) % 1.0 - 0.5
    half = np.abs(away).min(axis=1)
    edges = np.concatenate([across[:1], (across[1:] + across[:-1]) / 2, across[-1:]])
    left, width = edges[:-1], np.diff(edges)
    bottom = (middle - half) % 1.0
    over = np.clip(bottom + 2 * half - 1, 0, None)  # what runs over 1 comes in again at 0
    return (
        np.concatenate([left, left]),
        np.concatenate([2 * half - over, over]),
        np.concatenate([width, width]),
        np.concatenate([bottom, np.zeros_like(bottom)]),
    )


def _segments(plane: WilsonPlane) -> FloatArray:
    """(n, 2, 2) pieces that join each centre to its nearest on the next line, around the circle."""
    across, centres = np.asarray(plane.flow_across), np.asarray(plane.flow_hwcc)
    n = centres.shape[1]
    pieces = []
    for i in range(len(across) - 1):
        turned = np.stack([np.roll(centres[i + 1], -s) for s in range(-(n // 2), n - n // 2)])
        step = (turned - centres[i] + 0.5) % 1.0 - 0.5
        best = step[np.abs(step).sum(axis=1).argmin()]
        start, end = centres[i], centres[i] + best
        for offset in (0.0, 1.0, -1.0):  # a piece that leaves at one side enters at the other
            seen = (np.maximum(start, end) + offset >= 0) & (np.minimum(start, end) + offset <= 1)
            x = np.broadcast_to(across[i : i + 2], (int(seen.sum()), 2))
            y = np.stack([start[seen], end[seen]], axis=1) + offset
            pieces.append(np.stack([x, y], axis=2))
    return np.concatenate(pieces) if pieces else np.empty((0, 2, 2))


def _words(planes: Sequence[WilsonPlane]) -> str:
    each = "; ".join(f"plane {p.plane}: {_result(p)}, {p.lines} lines" for p in planes)
    return f"Centres of hybrid Wannier functions over half of each plane. {each}."
