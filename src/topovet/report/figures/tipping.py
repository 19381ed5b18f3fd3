"""How far each parameter can be turned before the verdict flips: bars around H as given."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from topovet.notation import z2_text
from topovet.report.figures import palette
from topovet.report.figures.canvas import bare, drawing, new_figure, to_svg

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Entry = Mapping[str, Any]

ROW_IN = 0.42
LEAST_REACH_EV = 0.05
"""Shifts of a few meV are drawn on an axis of at least this half-width."""

ENDED = ("flips", "exchange", "reopens", "closes")


def tipping_figure(entries: Sequence[Entry], *, name: str = "tipping") -> str:
    """One bar for each parameter as SVG text; shifts in eV above, the spin-orbit scale below.

    Parameters
    ----------
    entries
        `robustness.tipping` of a verdict, at least one.
    """
    shifts = _rows([e for e in entries if e["parameter"] == "on-site shift"])
    scales = _rows([e for e in entries if e["parameter"] != "on-site shift"])
    kinds = [rows for rows in (shifts, scales) if rows]
    with drawing(name):
        heights = [ROW_IN * len(rows) + 0.62 for rows in kinds]
        figure = new_figure(7.6, sum(heights) + 0.1)
        panels = figure.subplots(
            len(kinds), 1, squeeze=False, gridspec_kw={"height_ratios": heights}
        )[:, 0]
        for axes, rows in zip(panels, kinds, strict=True):
            _panel(axes, rows, is_scale=rows is scales)
        return to_svg(
            figure,
            name,
            title="How far until the verdict flips",
            description=" ".join(f"{e['sentence']}." for e in entries),
        )


def _rows(entries: Sequence[Entry]) -> dict[str, list[Entry]]:
    """Both directions of each parameter under its name."""
    rows: dict[str, list[Entry]] = {}
    for entry in entries:
        rows.setdefault(entry["group"] or "spin–orbit", []).append(entry)
    return rows


def _panel(axes: Axes, rows: Mapping[str, list[Entry]], *, is_scale: bool) -> None:
    bare(axes, keep=("bottom",))
    begin = 1.0 if is_scale else 0.0
    reach = 1.0 if is_scale else _reach(rows)
    axes.set_xlim(begin - 1.12 * reach, begin + 1.12 * reach)
    axes.set_ylim(-0.6, len(rows) - 0.35)
    axes.set_yticks(np.arange(len(rows))[::-1], list(rows))
    axes.tick_params(axis="y", length=0)
    for height, entries in zip(np.arange(len(rows))[::-1], rows.values(), strict=True):
        for entry in entries:
            _bar(axes, float(height), entry, begin, reach)
    axes.axvline(begin, color=palette.INK, linewidth=1.1, zorder=3)
    if is_scale:
        axes.set_xticks([0, 0.5, 1, 1.5, 2], ["0", "½", "1", "1½", "2"])
    axes.set_xlabel(
        "scale of spin–orbit coupling" if is_scale else "shift of on-site energies (eV)"
    )


def _reach(rows: Mapping[str, list[Entry]]) -> float:
    """Half-width of the axis: what happens fills it; where nothing does, the range searched."""
    together = [e for entries in rows.values() for e in entries]
    ends = [abs(float(e["critical_eV"])) for e in together if e["critical_eV"] is not None]
    ends += [abs(float(e["searched_to"])) for e in together if _is_counted_beyond(e)]
    if not ends:
        return max(abs(float(e["searched_to"])) for e in together)
    return max(LEAST_REACH_EV, 1.25 * max(ends))


def _bar(axes: Axes, height: float, entry: Entry, begin: float, reach: float) -> None:
    critical = entry["critical_scale"] if "critical_scale" in entry else entry["critical_eV"]
    sign = 1.0 if entry["direction"] == "up" else -1.0
    end = entry["searched_to"] if critical is None else critical
    shown = begin + float(np.clip(end - begin, -reach, reach))
    axes.barh(height, shown - begin, left=begin, height=0.34, color=palette.FILLED_TINT,
              edgecolor=palette.FILLED, linewidth=0.8, zorder=1)  # fmt: skip
    label_at = shown
    if _is_counted_beyond(entry):
        label_at = entry["searched_to"]
        axes.barh(height, label_at - shown, left=shown, height=0.34, color=palette.GAP_TINT,
                  edgecolor=palette.ODD, linewidth=0.6, zorder=1)  # fmt: skip
    if entry["outcome"] not in ENDED:
        axes.plot(shown, height, ">" if sign > 0 else "<", color=palette.FILLED, markersize=6,
                  clip_on=False, zorder=4)  # fmt: skip
        if end != shown:  # the bar goes on beyond the axis
            axes.annotate(
                f"on to {end:+g} eV".replace("-", "−"), (shown, height), xytext=(-8 * sign, 0),
                textcoords="offset points", ha="right" if sign > 0 else "left", va="center",
                fontsize=8.5, color=palette.FILLED,
            )  # fmt: skip
        return
    axes.plot(
        shown, height, "D", color=palette.ODD, markersize=6, zorder=4,
        markerfacecolor=palette.ODD if entry["outcome"] == "flips" else palette.WHITE,
    )  # fmt: skip
    # a label at the end of the axis stands inside the bar, clear of the name of the row
    side = -sign if abs(label_at - begin) > 0.9 * reach else sign
    axes.annotate(
        _end_label(entry), (label_at, height), xytext=(8 * side, 0), textcoords="offset points",
        ha="left" if side > 0 else "right", va="center", fontsize=8.5, color=palette.ODD,
    )  # fmt: skip


def _is_counted_beyond(entry: Entry) -> bool:
    """Whether indices were counted beyond a closing, at a value that is not the critical one."""
    return "k" in entry and entry["z2_after"] is not None


def _end_label(entry: Entry) -> str:
    """What the verdict flips to, in a word."""
    if entry["outcome"] == "closes":
        return "gap closes"
    if entry["outcome"] in ("exchange", "reopens"):
        return "states exchanged" if "trim" in entry else "gap closes, indices stay"
    if entry["z2_after"] != entry["z2_before"]:
        return z2_text(entry["z2_after"])
    if entry["z4_after"] != entry["z4_before"]:
        return f"Z₄ = {entry['z4_after']}"
    return "mirror Chern"
