"""The band structure: filled bands heavy on a tint, the gap shaded, parities at the TRIM."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from topovet.arrays import FloatArray
from topovet.invariants.irrep_results import PointIrreps
from topovet.invariants.results import TrimParity
from topovet.notation import ev, one_line
from topovet.report.figures import palette
from topovet.report.figures.canvas import bare, drawing, new_figure, to_svg
from topovet.report.figures.irrep_labels import Frame, IrrepLabel, draw_irreps, place_irreps
from topovet.report.figures.parity_marks import (
    PLOT_HEIGHT_PT,
    PLOT_WIDTH_PT,
    draw_parities,
    legend_marks,
    place_parities,
)
from topovet.spectrum.results import BandPath, GapSample

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_WIDTH_IN, _HEIGHT_IN = 8.8, 5.4
_LETTER_PT = 8.0
_COINCIDE_PT = 0.1
"""Bands that stay this close are drawn once: a fraction of the finest line."""
_MARGIN = 0.012
"""Of the length of the path, left free at either end."""
_DEPTH_EV, _HEADROOM_EV = 8.0, 2.5


@dataclass(frozen=True, slots=True)
class EnergyZero:
    """The energy that the figure counts from: its value in eV, and its name."""

    ev: float
    name: str
    symbol: str


def energy_zero(
    bands: BandPath, n_occ: int, gap: GapSample | None, fermi_ev: float | None
) -> EnergyZero:
    """Valence-band maximum of an insulator; else the Fermi energy; else the top filled band."""
    if gap is not None and gap.status == "insulator":
        return EnergyZero(gap.vbm_ev, "the valence-band maximum (sampled)", "E(VBM)")
    if fermi_ev is not None:
        return EnergyZero(fermi_ev, "the Fermi energy that was given", "E(F)")
    if 0 < n_occ <= bands.energies_ev.shape[1]:
        top = float(bands.energies_ev[:, n_occ - 1].max())
        return EnergyZero(top, f"the top of band {n_occ} on this path", f"E(top of band {n_occ})")
    return EnergyZero(0.0, "the zero of the file", "E(file)")


def bands_figure(
    bands: BandPath,
    *,
    n_occ: int,
    gap: GapSample | None = None,
    fermi_ev: float | None = None,
    trim: Sequence[TrimParity] = (),
    irreps: Sequence[PointIrreps] = (),
    window_ev: tuple[float, float] | None = None,
    name: str = "bands",
) -> str:
    """Bands along the path as SVG text.

    Parameters
    ----------
    bands
        Energies (eV) along the path, distance in 1/angstrom.
    n_occ
        Filling: bands 0..n_occ-1 are drawn as filled.
    gap
        Sampled gap, for the zero of energy and the shading.
    fermi_ev
        Fermi energy in eV; the zero where there is no insulating gap.
    trim
        Parities of all levels; drawn where the path meets their k.
    irreps
        Irreps at special points; the levels next to the gap are labelled.
    window_ev
        Lowest and highest energy shown, eV, relative to the zero.
    name
        Prefix of ids; differs between figures of one page.
    """
    zero = energy_zero(bands, n_occ, gap, fermi_ev)
    energies = bands.energies_ev - zero.ev
    low, high = window_ev or wide_window(energies, n_occ)
    with drawing(name):
        figure = new_figure(_WIDTH_IN, _HEIGHT_IN)
        axes = figure.add_subplot()
        _frame(axes, bands, zero, (low, high))
        _shade(axes, bands, energies, n_occ, gap, zero)
        _draw_fermi(axes, fermi_ev, zero)
        _draw_bands(axes, bands, energies, n_occ)
        marks = place_parities(bands, trim, zero.ev, (low, high))
        draw_parities(axes, marks)
        met, frame = {mark.kind for mark in marks}, _plot_frame(bands, (low, high))
        centres = np.array([[mark.distance, mark.energy_ev] for mark in marks]).reshape(-1, 2)
        centres = np.stack([frame.x_pt(centres[:, 0]), frame.y_pt(centres[:, 1])], axis=1)
        labels = place_irreps(bands, irreps, n_occ, zero.ev, frame, centres)
        draw_irreps(axes, labels, frame)
        _legend(figure, axes, met, gap)
        title = f"Band structure from {low:.1f} to {high:.1f} eV about {zero.name}"
        return to_svg(
            figure, name, title=title, description=_words(bands, n_occ, zero, met, labels)
        )


def wide_window(energies: FloatArray, n_occ: int) -> tuple[float, float]:
    """Window in eV that holds the filled bands (at most 8 eV deep) and the lowest empty ones."""
    top = energies[:, min(n_occ, energies.shape[1]) - 1].max() if n_occ > 0 else energies.min()
    low = max(energies.min(), top - _DEPTH_EV)
    first_empty = energies[:, n_occ].min() if n_occ < energies.shape[1] else top
    high = max(min(energies.max(), max(top, first_empty) + _HEADROOM_EV), top + 0.2)
    margin = 0.03 * (high - low)
    return float(low - margin), float(high + margin)


def near_gap_window(gap: GapSample) -> tuple[float, float]:
    """Window in eV that shows the gap at a third of the height or less, about the VBM."""
    edge = gap.cbm_ev - gap.vbm_ev
    reach = max(0.6, 1.2 * abs(edge))
    return min(0.0, edge) - reach, max(0.0, edge) + reach


def _frame(axes: Axes, bands: BandPath, zero: EnergyZero, window: tuple[float, float]) -> None:
    length = float(bands.distance[-1]) or 1.0
    positions, labels = _path_labels(bands)
    axes.set_xlim(-_MARGIN * length, (1 + _MARGIN) * length)
    axes.set_ylim(*window)
    axes.set_xticks(positions, _staggered(positions, labels, length * _LETTER_PT / PLOT_WIDTH_PT))
    axes.tick_params(axis="x", length=0, pad=6, labelsize=10.5)
    for x in positions:
        axes.axvline(x, color=palette.RULE, linewidth=0.8, zorder=0.5)
    axes.axhline(0.0, color=palette.MUTED, linewidth=0.7, linestyle=(0, (5, 3)), zorder=0.6)
    axes.set_ylabel(f"E − {zero.symbol}  (eV)")
    bare(axes, keep=("left",))
    scale = axes.secondary_xaxis("top")
    scale.set_xlabel("distance along the path  (1/Å)", fontsize=8.5, color=palette.MUTED)
    scale.tick_params(labelsize=8, length=3, labelcolor=palette.MUTED)
    scale.spines["top"].set_color(palette.RULE)


def _path_labels(bands: BandPath) -> tuple[list[float], list[str]]:
    """Distance and name of each special point; both names where the path jumps."""
    merged: dict[float, list[str]] = {}
    for index, label in zip(bands.label_index, bands.labels, strict=True):
        names = merged.setdefault(round(float(bands.distance[index]), 9), [])
        shown = point_name(label)
        if shown not in names:
            names.append(shown)
    return list(merged), ["|".join(names) for names in merged.values()]


def _staggered(positions: Sequence[float], labels: Sequence[str], least: float) -> list[str]:
    """Labels with every one that comes too close to its left neighbour set a line lower."""
    shown: list[str] = []
    for i, label in enumerate(labels):
        room = (len(labels[i - 1]) + len(label)) / 2 * least
        crowded = i > 0 and positions[i] - positions[i - 1] < room
        shown.append("\n" + label if crowded and not shown[-1].startswith("\n") else label)
    return shown


def point_name(label: str) -> str:
    """Typographic name of a special point: G is Γ, figures become subscripts."""
    if label in ("G", "Gamma", "GAMMA"):
        return "Γ"
    return one_line(label).translate(str.maketrans("0123456789", "₀₁₂₃₄₅₆₇₈₉"))


def _pieces(distance: FloatArray) -> Iterator[slice]:
    """Stretches of the path between jumps, where two points share one distance."""
    cuts = [0, *(np.flatnonzero(np.diff(distance) <= 0) + 1).tolist(), len(distance)]
    for start, stop in itertools.pairwise(cuts):
        if stop - start > 1:
            yield slice(start, stop)


def _shade(
    axes: Axes,
    bands: BandPath,
    energies: FloatArray,
    n_occ: int,
    gap: GapSample | None,
    zero: EnergyZero,
) -> None:
    if not 0 < n_occ < energies.shape[1]:
        return
    floor = axes.get_ylim()[0]
    insulating = gap is not None and gap.status == "insulator"
    if gap is not None and insulating:
        edges = (gap.vbm_ev - zero.ev, gap.cbm_ev - zero.ev)
        axes.axhspan(*edges, facecolor=palette.GAP_TINT, edgecolor="none", zorder=0.2)
    for piece in _pieces(bands.distance):
        x, top, next_up = bands.distance[piece], energies[piece, n_occ - 1], energies[piece, n_occ]
        below = np.maximum(top, floor)
        axes.fill_between(x, floor, below, color=palette.FILLED_TINT, linewidth=0, zorder=0.3)
        if not insulating:
            axes.fill_between(
                x, top, next_up, facecolor=palette.GAP_TINT, alpha=0.45, linewidth=0, zorder=0.25
            )


def _draw_fermi(axes: Axes, fermi_ev: float | None, zero: EnergyZero) -> None:
    """The Fermi energy that was given, where it is not the zero itself."""
    low, high = axes.get_ylim()
    if fermi_ev is None or fermi_ev == zero.ev or not low < fermi_ev - zero.ev < high:
        return
    place = fermi_ev - zero.ev
    axes.axhline(place, color=palette.MUTED, linewidth=0.9, linestyle=(0, (1, 2)), zorder=0.7)
    axes.annotate(
        "E(F) given",
        (1.0, place),
        xycoords=("axes fraction", "data"),
        xytext=(4, 0),
        textcoords="offset points",
        va="center",
        fontsize=8,
        color=palette.MUTED,
    )


def _draw_bands(axes: Axes, bands: BandPath, energies: FloatArray, n_occ: int) -> None:
    low, high = axes.get_ylim()
    coincide_ev = _COINCIDE_PT * (high - low) / PLOT_HEIGHT_PT
    for band in distinct_bands(energies, n_occ, coincide_ev):
        if energies[:, band].min() > high or energies[:, band].max() < low:
            continue
        filled = band < n_occ
        for piece in _pieces(bands.distance):
            axes.plot(
                bands.distance[piece],
                np.clip(energies[piece, band], low - 1.0, high + 1.0),
                color=palette.FILLED if filled else palette.EMPTY,
                linewidth=1.7 if filled else 0.8,
                zorder=2.0 if filled else 1.8,
            )


def distinct_bands(energies: FloatArray, n_occ: int, coincide_ev: float) -> list[int]:
    """Bands to draw: one of each set that coincides along the whole path (Kramers pairs).

    A filled and an empty band are both kept even where they coincide, and every band lies within
    `coincide_ev` of one that is drawn.
    """
    drawn: list[int] = []
    for band in range(energies.shape[1]):
        fresh = band in (0, n_occ)
        if fresh or np.abs(energies[:, band] - energies[:, drawn[-1]]).max() > coincide_ev:
            drawn.append(band)
    return drawn


def _legend(figure: Figure, axes: Axes, met: set[str], gap: GapSample | None) -> None:
    from matplotlib.lines import Line2D
    from matplotlib.patches import Patch

    entries: list[tuple[Any, str]] = [
        (Line2D([], [], color=palette.FILLED, linewidth=1.9), "filled band"),
        (Line2D([], [], color=palette.EMPTY, linewidth=0.9), "empty band"),
    ]
    insulating = gap is not None and gap.status == "insulator"
    label = f"gap, {ev(gap.indirect_ev)}" if gap is not None and insulating else "direct gap"
    tint = Patch(facecolor=palette.GAP_TINT, alpha=1.0 if insulating else 0.45)
    entries.append((tint, label))
    entries += legend_marks(met)
    handles, labels = zip(*entries, strict=True)
    figure.legend(
        handles, labels, loc="outside lower center", ncols=len(entries), frameon=False, fontsize=9
    )


def _plot_frame(bands: BandPath, window: tuple[float, float]) -> Frame:
    length = float(bands.distance[-1]) or 1.0
    return Frame(
        left=-_MARGIN * length,
        length=(1 + 2 * _MARGIN) * length,
        low=window[0],
        height=window[1] - window[0],
        width_pt=PLOT_WIDTH_PT,
        height_pt=PLOT_HEIGHT_PT,
    )


def _words(
    bands: BandPath,
    n_occ: int,
    zero: EnergyZero,
    met: set[str],
    labels: Sequence[IrrepLabel],
) -> str:
    names = ", ".join(_path_labels(bands)[1])
    marks = f" Parity marks at the TRIM: {', '.join(sorted(met))}." if met else ""
    if labels:
        marks += f" Irreps beside the levels next to the gap: {', '.join(x.text for x in labels)}."
    return (
        f"Bands along {names}; energies in eV from {zero.name}, {ev(zero.ev)} in the file. "
        f"The lowest {n_occ} bands are filled and drawn heavy.{marks}"
    )
