"""How well each symmetry operation holds: violation of the operator and shift of the bands."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from topovet.notation import mev
from topovet.report.figures import palette
from topovet.report.figures.canvas import bare, drawing, new_figure, to_svg
from topovet.symmetry.group_results import GroupTest, OperationTest

LEAST_MEV = 1e-3
"""Smaller violations are rounding of the file; they stand at the left edge."""

ROW_IN = 0.17
"""Height of a row, inches: 48 operations fit on a page."""


def operations_figure(group: GroupTest, *, name: str = "operations") -> str:
    """One row for each operation as SVG text: where it was judged, and between mesh points.

    Parameters
    ----------
    group
        With at least one operation that has an operator.
    """
    tests = [test for test in (*group.operations, group.time_reversal) if not test.missing]
    rows = np.arange(len(tests))[::-1]
    with drawing(name):
        figure = new_figure(7.6, 0.75 + ROW_IN * max(len(tests), 3))
        axes = figure.add_subplot()
        bare(axes)
        judged = _values([t.judged_mev for t in tests])
        between = _values([t.violation_mev for t in tests])
        bands = _values([t.judged_shift_mev for t in tests])
        # limits first: on their own, equal violations would leave the axis without extent
        axes.set_xlim(LEAST_MEV / 1.4, 2.0 * max(float(between.max()), group.tolerance_mev))
        axes.set_ylim(-0.7, len(tests) - 0.3)
        axes.set_xscale("log")
        axes.hlines(rows, judged, between, color=palette.RULE, linewidth=0.9, zorder=1)
        axes.plot(
            between, rows, "|", color=palette.MUTED, markersize=6, label="between mesh points"
        )
        axes.plot(judged, rows, "o", color=palette.FILLED, markersize=4.2, label="at mesh points")
        axes.plot(
            bands, rows, "D", color=palette.ODD, markerfacecolor="none", markersize=3.6,
            label="filled bands",
        )  # fmt: skip
        axes.axvline(group.tolerance_mev, color=palette.ODD, linewidth=0.8, linestyle=(0, (5, 3)))
        decades = 10.0 ** np.arange(-3, np.floor(np.log10(axes.get_xlim()[1])) + 1)
        axes.set_xticks(decades, [f"{decade:g}" for decade in decades])
        axes.set_yticks(rows, [test.name for test in tests], fontsize=7.5)
        axes.set_xlabel("violation (meV)")
        axes.legend(loc="lower center", bbox_to_anchor=(0.5, 1.0), ncols=3, frameon=False,
                    fontsize=8)  # fmt: skip
        return to_svg(
            figure, name, title="Violation of each operation", description=_words(group, tests)
        )


def _values(numbers: Sequence[float | None]) -> np.ndarray[tuple[int, ...], np.dtype[np.float64]]:
    """For the logarithmic axis: at least `LEAST_MEV`; unknown ones are not drawn."""
    return np.array([np.nan if v is None else max(v, LEAST_MEV) for v in numbers])


def _words(group: GroupTest, tests: Sequence[OperationTest]) -> str:
    worst = max((t.judged_mev or 0.0 for t in tests), default=0.0)
    return (
        f"{len(tests)} operations; largest violation where they are judged {mev(worst)}, tolerance "
        f"{mev(group.tolerance_mev)}. {group.sentence}"
    )
