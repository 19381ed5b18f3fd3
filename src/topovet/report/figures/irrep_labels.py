"""Irreps beside the bands at special points: the levels next to the gap, each named once.

A label stands right or left of its point, level with its band or a little above or below, where
the fewest bands, marks and other labels are in its way.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from topovet.arrays import FloatArray
from topovet.invariants.irrep_results import LevelIrreps, PointIrreps
from topovet.notation import one_line
from topovet.report.figures import palette
from topovet.spectrum.results import BandPath

if TYPE_CHECKING:
    from matplotlib.axes import Axes

LEVELS_EACH_SIDE = 3
"""Levels labelled below and above the filling at each point."""

LABEL_PT = 8.0
LINE_PT = 8.6
"""Height that a label takes, points."""

CHARACTER_PT = 4.8
"""Mean width of a character of that size, points."""

CLEARANCE_PT = 3.0
"""Between a point's line, or its parity marks, and a label."""

STEPS_PT = (0.0, 5.5, -5.5, 8.5, -8.5, 11.5, -11.5)
"""Heights above the level that are tried."""

STEP_COST, SIDE_COST, LABEL_COST = 0.35, 4.0, 40.0
"""Of a point of height, of the left side, and of meeting another label or a mark, in points of band
that run through the label."""

CROSSED_COST, RULE_COST = 6.0, 3.0
"""Of any band that runs through a label, and of the dashed line at the zero of energy."""

NEARER_COST, ORDER_COST = 9.0, 25.0
"""Of standing nearer to another level of the point, and above a label whose level is higher."""

TOO_CROWDED = 18.0
"""A label that costs more than this is left to the table."""

_SUBSCRIPTS = str.maketrans("0123456789,", "₀₁₂₃₄₅₆₇₈₉‚")
_SIGNS = {"+": "⁺", "−": "⁻", "±": "±"}


@dataclass(frozen=True, slots=True)
class IrrepLabel:
    """One label: its box and its level, points from the lower left corner of the plot; its text.

    Attributes
    ----------
    x_pt
        Its special point.
    left_pt, right_pt, y_pt
        Ends of the box and its middle.
    level_pt
        Height of the level.
    side
        +1 right of its point, -1 left of it.
    filled
        Whether the level is.
    """

    x_pt: float
    left_pt: float
    right_pt: float
    y_pt: float
    level_pt: float
    side: int
    text: str
    filled: bool


@dataclass(frozen=True, slots=True)
class Frame:
    """The plot in points: left end and extent of the path, lower end and extent of the energies."""

    left: float
    length: float
    low: float
    height: float
    width_pt: float
    height_pt: float

    def x_pt(self, distance: FloatArray | float) -> FloatArray:
        return np.asarray((np.asarray(distance) - self.left) / self.length * self.width_pt)

    def y_pt(self, energy: FloatArray | float) -> FloatArray:
        return np.asarray((np.asarray(energy) - self.low) / self.height * self.height_pt)


class _Drawing:
    """What is already on the plot: bands, marks, labels; all in points."""

    def __init__(
        self, bands: BandPath, zero_ev: float, frame: Frame, marks: FloatArray | None
    ) -> None:
        self._x = frame.x_pt(bands.distance)
        self._y = frame.y_pt(bands.energies_ev - zero_ev)
        self._frame = frame
        self.marks = np.empty((0, 2)) if marks is None else marks
        self.labels: list[IrrepLabel] = []

    def cost(self, label: IrrepLabel) -> float:
        """What stands in the label's way."""
        half = LINE_PT / 2
        if label.left_pt < 0 or label.right_pt > self._frame.width_pt:
            return np.inf
        if not half <= label.y_pt <= self._frame.height_pt - half:
            return np.inf
        x = np.linspace(label.left_pt, label.right_pt, 9)
        y = np.array([np.interp(x, self._x, band) for band in self._y.T])
        lower, upper = np.minimum(y[:, 1:], y[:, :-1]), np.maximum(y[:, 1:], y[:, :-1])
        inside = ((lower < label.y_pt + half - 0.8) & (upper > label.y_pt - half + 0.8)).any(axis=0)
        through = float(inside.mean()) * (label.right_pt - label.left_pt)
        through += CROSSED_COST * bool(inside.any())
        through += RULE_COST * (abs(float(self._frame.y_pt(0.0)) - label.y_pt) < half - 0.8)
        reach = 3.8  # of a parity mark, about its centre
        hit = (np.abs(self.marks[:, 1] - label.y_pt) < half + reach) & (
            (self.marks[:, 0] > label.left_pt - reach) & (self.marks[:, 0] < label.right_pt + reach)
        )
        met = sum(
            abs(other.y_pt - label.y_pt) < LINE_PT
            and other.left_pt < label.right_pt
            and label.left_pt < other.right_pt
            for other in self.labels
        )
        moved = STEP_COST * abs(label.y_pt - label.level_pt) + SIDE_COST * (label.side < 0)
        moved += NEARER_COST * self._nearer_to_another(label)
        moved += ORDER_COST * self._out_of_order(label)
        return through + moved + LABEL_COST * (met + int(hit.sum()))

    def _nearer_to_another(self, label: IrrepLabel) -> bool:
        at_point = np.array([np.interp(label.x_pt, self._x, band) for band in self._y.T])
        others = at_point[np.abs(at_point - label.level_pt) > 1.0]
        own = abs(label.y_pt - label.level_pt)
        return bool(np.abs(others - label.y_pt).min(initial=np.inf) < own)

    def _out_of_order(self, label: IrrepLabel) -> bool:
        return any(
            (other.y_pt - label.y_pt) * (other.level_pt - label.level_pt) < 0
            for other in self.labels
            if other.x_pt == label.x_pt
        )


def place_irreps(
    bands: BandPath,
    irreps: Sequence[PointIrreps],
    n_occ: int,
    zero_ev: float,
    frame: Frame,
    marks: FloatArray | None = None,
) -> tuple[IrrepLabel, ...]:
    """Where labels go: beside the first place of each point on the path.

    Points of one irrep only say nothing and get no label.

    Parameters
    ----------
    bands
        The path, distance in 1/angstrom.
    irreps
        Levels of the special points.
    n_occ
        Filling.
    zero_ev
        Zero of the energies shown.
    frame
        The plot.
    marks
        (n, 2) centres of parity marks, points.
    """
    drawing = _Drawing(bands, zero_ev, frame, marks)
    done: set[str] = set()
    for index in bands.label_index:
        point = _point_at(bands.k_frac[index], irreps)
        if point is None or point.point in done or not _tells(point):
            continue
        done.add(point.point)
        x = float(frame.x_pt(bands.distance[index]))
        for energy, text, filled in _near_gap(point, n_occ, zero_ev, frame):
            level = float(frame.y_pt(energy))
            tried = [
                _candidate(x, side, level, step, text, filled=filled, marks=drawing.marks)
                for side in (1, -1)
                for step in STEPS_PT
            ]
            best = min(tried, key=drawing.cost)
            if drawing.cost(best) <= TOO_CROWDED:
                drawing.labels.append(best)
    return tuple(drawing.labels)


def _candidate(
    x: float,
    side: int,
    level: float,
    step: float,
    text: str,
    *,
    filled: bool,
    marks: FloatArray,
) -> IrrepLabel:
    """A label on one side of a point, clear of the marks on that level."""
    near = np.abs(marks - np.array([x, level + step]))
    own = marks[(near[:, 1] < 8.0) & (near[:, 0] < 30.0), 0] - x
    reach = max(0.0, float((side * own).max(initial=-3.0)) + 3.0)
    start, width = x + side * (CLEARANCE_PT + reach), CHARACTER_PT * len(text)
    left, right = sorted((start, start + side * width))
    return IrrepLabel(x, left, right, level + step, level, side, text, filled)


def draw_irreps(axes: Axes, labels: Sequence[IrrepLabel], frame: Frame) -> None:
    """The labels in the colour of their bands, with a hair-line to a level that is further away."""
    from matplotlib.transforms import Affine2D

    to_data = Affine2D().scale(frame.length / frame.width_pt, frame.height / frame.height_pt)
    place = to_data.translate(frame.left, frame.low) + axes.transData
    for label in labels:
        colour = palette.FILLED if label.filled else palette.EMPTY
        start = label.left_pt if label.side > 0 else label.right_pt
        if abs(label.y_pt - label.level_pt) > 7.0:
            axes.plot(
                [start - 2.5 * label.side, start - 0.5 * label.side],
                [label.level_pt, label.y_pt],
                color=colour,
                linewidth=0.5,
                transform=place,
                zorder=4.1,
            )
        axes.text(
            start,
            label.y_pt,
            label.text,
            fontsize=LABEL_PT,
            color=colour,
            ha="left" if label.side > 0 else "right",
            va="center_baseline",
            transform=place,
            zorder=4.2,
        )


def irrep_text(level: LevelIrreps) -> str:
    """The textbook's name, else our own, as it is set: "Γ8+" is Γ₈⁺; empty where not resolved."""
    if not level.content.resolved or level.label == "?":
        return ""
    own = level.textbook is None
    parts = [_typeset(part, own=own) for part in (level.textbook or level.label).split("⊕")]
    return one_line("⊕".join(parts))


def _typeset(name: str, *, own: bool) -> str:
    name = name.strip().replace("G", "Γ")
    sign = _SIGNS.get(name[-1:], "")
    body = name[:-1] if sign else name
    return (body if own else body[:1] + body[1:].translate(_SUBSCRIPTS)) + sign


def _point_at(k: FloatArray, irreps: Sequence[PointIrreps]) -> PointIrreps | None:
    """The special point with this k, or with one of its star, modulo a reciprocal vector."""
    for point in irreps:
        apart = point.star - k
        if (np.abs(apart - np.round(apart)).max(axis=1) < 1e-5).any():
            return point
    return None


def _tells(point: PointIrreps) -> bool:
    return len({irrep_text(level) for level in point.levels} - {""}) > 1


def _near_gap(
    point: PointIrreps, n_occ: int, zero_ev: float, frame: Frame
) -> list[tuple[float, str, bool]]:
    """(energy, text, filled) of the levels next to the gap that the window shows, nearest first."""
    below = [level for level in point.levels if level.first_band + level.n_bands <= n_occ]
    rest = [level for level in point.levels if level not in below]
    chosen = below[: -LEVELS_EACH_SIDE - 1 : -1] + rest[:LEVELS_EACH_SIDE]
    shown = [
        (level.energy_ev - zero_ev, irrep_text(level), level in below)
        for level in chosen
        if irrep_text(level)
    ]
    high = frame.low + frame.height
    return [entry for entry in shown if frame.low < entry[0] < high]
