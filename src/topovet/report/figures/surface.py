"""The surface spectral density as a map with height lines, one panel for each termination.

Lightness alone carries the density, in equal steps of perceived lightness, so that the map reads in
grey and in every kind of colour vision; a second row shows which way the spin points. It is odd
where time reversal holds, so that its two colours are told apart by side as well.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from topovet.arrays import FloatArray
from topovet.boundary.results import SurfaceMap
from topovet.notation import ev, one_line
from topovet.report.figures import palette
from topovet.report.figures.bands import point_name
from topovet.report.figures.canvas import bare, drawing, new_figure, to_svg

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

STEPS = 9
"""Height lines of the density."""

FLOOR = 0.03
"""Densities below this share of the largest are left white."""

SPIN_FLOOR = 0.12
"""The same for the spin."""


def surface_figure(
    maps: Sequence[SurfaceMap],
    *,
    zero_ev: float,
    zero_name: str,
    zero_symbol: str = "E₀",
    name: str = "surface",
) -> str:
    """Density, and spin where there is one, of every termination as SVG text.

    Parameters
    ----------
    maps
        One or two, of one surface.
    zero_ev, zero_name, zero_symbol
        Zero of the energy axis, what it is, and how the axis calls it.
    name
        Prefix of ids.
    """
    rows = 2 if any(m.spin is not None for m in maps) else 1
    columns = len(maps)
    with drawing(name):
        figure = new_figure(4.1 * columns + 0.6, 3.2 * rows + 0.5)
        panels = figure.subplots(rows, columns, squeeze=False, sharex=True, sharey=True)
        largest = max(float(m.density.max()) for m in maps)
        for column, found in enumerate(maps):
            _density(panels[0, column], found, zero_ev, largest)
            panels[0, column].set_title(_title(found), fontsize=9.5, loc="left")
            if rows == 2:
                _spin(panels[1, column], found, zero_ev)
        for axes in panels[:, 0]:
            axes.set_ylabel(f"E − {zero_symbol}  (eV)")
        _legend(figure, rows)
        return to_svg(
            figure,
            name,
            title=f"Surface spectral density of ({_miller(maps[0])})",
            description=_words(maps, zero_ev, zero_name),
        )


def lightness_ramp(steps: int) -> tuple[str, ...]:
    """Hexadecimal colours from the page's white to its ink in equal steps of perceived lightness.

    Interpolated in OKLab (B. Ottosson, 2020), whose first coordinate is made for that.
    """
    ends = np.array([_oklab(palette.WHITE), _oklab(palette.FILLED), _oklab("#06202f")])
    lightness = np.linspace(ends[0, 0], ends[2, 0], steps)
    # np.interp wants ascending coordinates; lightness falls along the ramp
    tint = [np.interp(-lightness, -ends[:, 0], ends[:, i]) for i in (1, 2)]
    return tuple(_hex(np.array([x, a, b])) for x, a, b in zip(lightness, *tint, strict=True))


def _density(axes: Axes, found: SurfaceMap, zero_ev: float, largest: float) -> None:
    levels = largest * np.geomspace(FLOOR, 1.0, STEPS)
    colours = lightness_ramp(STEPS + 1)[1:]
    _frame(axes, found, zero_ev)
    axes.contourf(
        found.distance,
        found.energies_ev - zero_ev,
        found.density.T,
        levels=levels,
        colors=colours[: STEPS - 1],
        extend="neither",
    )
    _bulk_edges(axes, found, zero_ev)


def _spin(axes: Axes, found: SurfaceMap, zero_ev: float) -> None:
    _frame(axes, found, zero_ev)
    if found.spin is None:
        return
    sideways = found.spin[:, :, 0]
    largest = float(np.abs(sideways).max())
    if largest <= 0:
        return
    for sign, colour in ((1.0, palette.FILLED), (-1.0, palette.ODD)):
        for share, alpha in ((SPIN_FLOOR, 0.35), (2.5 * SPIN_FLOOR, 0.65), (0.6, 1.0)):
            if (sign * sideways).max() <= share * largest:
                continue
            axes.contourf(
                found.distance,
                found.energies_ev - zero_ev,
                (sign * sideways).T,
                levels=[share * largest, 2 * largest],
                colors=[_tint(colour, alpha)],
            )
    _bulk_edges(axes, found, zero_ev)


def _bulk_edges(axes: Axes, found: SurfaceMap, zero_ev: float) -> None:
    low, high = axes.get_ylim()
    for edge in (found.top_ev, found.bottom_ev):
        axes.plot(
            found.distance,
            np.clip(edge - zero_ev, low - 1, high + 1),
            color=palette.EMPTY,
            linewidth=0.9,
            linestyle=(0, (4, 2)),
        )


def _frame(axes: Axes, found: SurfaceMap, zero_ev: float) -> None:
    bare(axes, keep=("left",))
    axes.set_xlim(found.distance[0], found.distance[-1])
    axes.set_ylim(found.energies_ev[0] - zero_ev, found.energies_ev[-1] - zero_ev)
    at = [float(found.distance[i]) for i in found.label_index]
    axes.set_xticks(at, [f"{point_name(label)}\u0305" for label in found.labels])
    axes.tick_params(axis="x", length=0, pad=6, labelsize=10.5)
    for x in at:
        axes.axvline(x, color=palette.RULE, linewidth=0.8, zorder=0.5)
    axes.axhline(0.0, color=palette.MUTED, linewidth=0.7, linestyle=(0, (1, 2)), zorder=3)


def _legend(figure: Figure, rows: int) -> None:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    ramp = lightness_ramp(STEPS + 1)
    handles = [
        Patch(facecolor=ramp[2]),
        Patch(facecolor=ramp[STEPS - 1]),
        Line2D([], [], color=palette.EMPTY, linewidth=0.9, linestyle=(0, (4, 2))),
    ]
    labels = ["low density", "high density", "edges of the bulk bands"]
    if rows == 2:
        handles += [Patch(facecolor=palette.FILLED), Patch(facecolor=palette.ODD)]
        labels += ["spin to the left of the path", "to the right"]
    figure.legend(
        handles, labels, loc="outside lower center", ncols=len(labels), frameon=False, fontsize=8.5
    )


def _title(found: SurfaceMap) -> str:
    return f"({_miller(found)}), {one_line(found.termination)}"


def _miller(found: SurfaceMap) -> str:
    return " ".join(str(c).replace("-", "−") for c in found.miller)


def _words(maps: Sequence[SurfaceMap], zero_ev: float, zero_name: str) -> str:
    names = "; ".join(_title(m) for m in maps)
    path = ", ".join(maps[0].labels)
    return (
        f"Spectral density on the outermost plane of {names}, along {path}. Energies in eV from "
        f"{zero_name}, {ev(zero_ev)} in the file; every level is broadened by "
        f"{ev(maps[0].broadening_ev)}."
    )


def _tint(colour: str, alpha: float) -> str:
    mixed = alpha * _oklab(colour) + (1 - alpha) * _oklab(palette.WHITE)
    return _hex(mixed)


_TO_LMS = np.array(
    [
        [0.4122214708, 0.5363325363, 0.0514459929],
        [0.2119034982, 0.6806995451, 0.1073969566],
        [0.0883024619, 0.2817188376, 0.6299787005],
    ]
)
_TO_LAB = np.array(
    [
        [0.2104542553, 0.7936177850, -0.0040720468],
        [1.9779984951, -2.4285922050, 0.4505937099],
        [0.0259040371, 0.7827717662, -0.8086757660],
    ]
)


def _oklab(colour: str) -> FloatArray:
    rgb = np.array([int(colour[i : i + 2], 16) for i in (1, 3, 5)]) / 255
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    return np.asarray(_TO_LAB @ np.cbrt(_TO_LMS @ linear))


def _hex(lab: FloatArray) -> str:
    linear = np.linalg.solve(_TO_LMS, np.linalg.solve(_TO_LAB, lab) ** 3).clip(0, 1)
    rgb = np.where(linear <= 0.0031308, 12.92 * linear, 1.055 * linear ** (1 / 2.4) - 0.055)
    return "#" + "".join(f"{round(255 * float(c)):02x}" for c in rgb)
