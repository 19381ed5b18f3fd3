"""Parity marks on a band structure, chosen to mean what they show.

Point inversion leaves a full disc as it is (even) and exchanges the halves of a half disc (odd).
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from topovet.arrays import FloatArray
from topovet.invariants.results import TrimParity
from topovet.report.figures import palette
from topovet.spectrum.results import BandPath

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.lines import Line2D

PLOT_WIDTH_PT, PLOT_HEIGHT_PT = 565.0, 285.0
"""Rough size of the plot area, for judging what would overlap."""

_MARK_PT = 6.4
_TRIM_TOLERANCE = 1e-6
_PURE = 0.9

_MARKS: dict[str, dict[str, Any]] = {
    "even": {"marker": "o", "fillstyle": "full", "color": palette.FILLED},
    "odd": {
        "marker": "o",
        "fillstyle": "left",
        "color": palette.ODD,
        "markerfacecoloralt": palette.WHITE,
    },
    "mixed": {
        "marker": "D",
        "fillstyle": "none",
        "color": palette.INK,
        "markerfacecoloralt": palette.WHITE,
    },
}


@dataclass(frozen=True, slots=True)
class Mark:
    """One mark: distance along the path, energy shown in eV, and its kind."""

    distance: float
    energy_ev: float
    kind: str


def place_parities(
    bands: BandPath, trim: Sequence[TrimParity], zero_ev: float, window: tuple[float, float]
) -> tuple[Mark, ...]:
    """Marks at every TRIM on the path; those that would overlap stand side by side."""
    ev_per_mark = _MARK_PT * (window[1] - window[0]) / PLOT_HEIGHT_PT
    k_per_mark = 1.15 * _MARK_PT * float(bands.distance[-1]) / PLOT_WIDTH_PT
    marks: list[Mark] = []
    for x, side, parity in _trim_on_path(bands, trim):
        levels = np.asarray(parity.level_energies_ev) - zero_ev
        shown = (levels > window[0]) & (levels < window[1])
        kinds = [parity_kind(p) for p, s in zip(parity.level_parities, shown, strict=True) if s]
        places = spread(levels[shown], ev_per_mark)
        if side and len(places):
            places += side * (0.6 + np.abs(places).max())
        marks += [
            Mark(x + float(place) * k_per_mark, float(energy), kind)
            for energy, place, kind in zip(levels[shown], places, kinds, strict=True)
        ]
    return tuple(marks)


def draw_parities(axes: Axes, marks: Sequence[Mark]) -> None:
    for mark in marks:
        axes.plot(
            [mark.distance],
            [mark.energy_ev],
            markersize=_MARK_PT,
            markeredgewidth=1.0,
            clip_on=False,
            zorder=4,
            **_MARKS[mark.kind],
        )


def parity_kind(parity: float) -> str:
    """ "even", "odd", or "mixed" where the mean parity of the level is far from both."""
    if abs(parity) < _PURE:
        return "mixed"
    return "even" if parity > 0 else "odd"


def spread(energies: FloatArray, least: float) -> FloatArray:
    """Sideways places of marks, in mark widths: runs closer than `least` sit side by side.

    Parameters
    ----------
    energies
        (n,) ascending.
    least
        Distance below which two marks would overlap.
    """
    places = np.zeros(len(energies))
    starts = [0, *(np.flatnonzero(np.diff(energies) >= least) + 1).tolist(), len(energies)]
    for start, stop in itertools.pairwise(starts):
        places[start:stop] = np.arange(stop - start) - (stop - start - 1) / 2
    return places


def _trim_on_path(
    bands: BandPath, trim: Sequence[TrimParity]
) -> Iterator[tuple[float, int, TrimParity]]:
    """Every path point that equals a TRIM modulo a reciprocal lattice vector.

    Gives its distance and the side to which its marks belong: -1 where the path ends there and
    jumps elsewhere, +1 where it starts after a jump, else 0.
    """
    jumps = np.flatnonzero(np.diff(bands.distance) <= 0)
    for parity in trim:
        away = bands.k_frac - np.asarray(parity.k)
        hits = np.flatnonzero(np.abs(away - np.round(away)).max(axis=1) < _TRIM_TOLERANCE)
        sides: dict[float, int] = {}
        for hit in hits.tolist():
            x = round(float(bands.distance[hit]), 9)
            sides[x] = sides.get(x, 0) + int(hit - 1 in jumps) - int(hit in jumps)
        for x, side in sides.items():
            yield x, side, parity


def legend_marks(kinds: set[str]) -> list[tuple[Line2D, str]]:
    """Entries of a legend for the kinds that were drawn."""
    from matplotlib.lines import Line2D

    return [
        (Line2D([], [], linestyle="none", markersize=7, **_MARKS[kind]), f"{kind} parity")
        for kind in _MARKS
        if kind in kinds
    ]
