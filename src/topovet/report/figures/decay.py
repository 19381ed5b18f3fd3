"""How fast the Hamiltonian decays: largest element in each shell against its distance."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from topovet.arrays import FloatArray
from topovet.intake.audit_results import HamiltonianAudit
from topovet.report.figures import palette
from topovet.report.figures.canvas import bare, drawing, new_figure, to_svg
from topovet.report.notation import mev, significant

if TYPE_CHECKING:
    from matplotlib.axes import Axes


def decay_figure(audit: HamiltonianAudit, *, name: str = "decay") -> str:
    """Largest |H(R)| in meV on a logarithmic scale against |R| in angstrom, as SVG text.

    Shells whose elements are all zero have no place on a logarithmic scale and are left out; the
    description says how many.
    """
    distance = np.asarray(audit.shells_ang, dtype=float)
    largest = np.asarray(audit.shells_mev, dtype=float)
    shown = largest > 0
    with drawing(name):
        figure = new_figure(4.6, 2.9)
        axes = figure.add_subplot()
        _draw(axes, distance[shown], largest[shown], audit)
        zeros = int((~shown).sum())
        words = (
            f"{int(shown.sum())} shells of lattice vectors; the largest element falls from "
            f"{_range(largest[shown])}. {zeros} shells hold only zeros and are left out. "
            f"On the rim of the list the largest element is {mev(audit.rim_mev)}."
        )
        return to_svg(figure, name, title="Decay of the Hamiltonian", description=words)


def _draw(axes: Axes, distance: FloatArray, largest: FloatArray, audit: HamiltonianAudit) -> None:
    bare(axes)
    axes.set_xlabel("distance |R|  (Å)")
    axes.set_ylabel("largest |H(R)|  (meV)")
    if len(largest) == 0:
        return
    axes.set_yscale("log")
    floor = 10.0 ** np.floor(np.log10(largest.min()) - 0.2)
    axes.set_ylim(floor, 10.0 ** np.ceil(np.log10(largest.max()) + 0.1))
    axes.yaxis.set_major_formatter(lambda value, _: significant(value, 1))
    axes.yaxis.set_minor_formatter(lambda *_: "")
    axes.grid(axis="y", linewidth=0.6)
    axes.vlines(distance, floor, largest, color=palette.RULE, linewidth=0.7)
    axes.plot(distance, largest, "o", markersize=3.6, color=palette.FILLED, zorder=3)
    reach = float(distance.max()) or 1.0
    axes.set_xlim(-0.02 * reach, 1.03 * reach)
    if audit.rim_mev > floor:
        axes.axhline(audit.rim_mev, color=palette.ODD, linewidth=0.9, linestyle=(0, (6, 3)))
        axes.annotate(
            f"rim\n{mev(audit.rim_mev)}",
            (1.0, audit.rim_mev),
            xycoords=("axes fraction", "data"),
            xytext=(4, 0),
            textcoords="offset points",
            va="center",
            fontsize=8.5,
            color=palette.ODD,
        )


def _range(largest: FloatArray) -> str:
    if len(largest) == 0:
        return "nothing to nothing"
    return f"{mev(float(largest[0]))} to {mev(float(largest[-1]))}"
