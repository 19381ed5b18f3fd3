"""How fast the Hamiltonian decays: largest element against distance, with the rim marked."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from topovet.arrays import FloatArray
from topovet.model.decay import DecayProfile
from topovet.notation import mev, significant
from topovet.report.figures import palette
from topovet.report.figures.canvas import bare, drawing, new_figure, to_svg

if TYPE_CHECKING:
    from matplotlib.axes import Axes


def decay_figure(decay: DecayProfile, *, name: str = "decay") -> str:
    """Largest |H(R)| in meV on a logarithmic scale against distance in angstrom, as SVG text.

    Distances whose elements are all zero have no place on a logarithmic scale and are left out;
    the description says how many.
    """
    distance = np.asarray(decay.distances_ang, dtype=float)
    largest = np.asarray(decay.largest_mev, dtype=float)
    shown = largest > 0
    with drawing(name):
        figure = new_figure(4.6, 2.9)
        axes = figure.add_subplot()
        _draw(axes, distance[shown], largest[shown], decay)
        words = _words(largest, decay)
        return to_svg(figure, name, title="Decay of the Hamiltonian", description=words)


def _draw(axes: Axes, distance: FloatArray, largest: FloatArray, decay: DecayProfile) -> None:
    bare(axes)
    between = "|R|" if decay.positions == "lattice vectors" else "between the functions"
    axes.set_xlabel(f"distance {between}  (Å)")
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
    reach = max(float(distance.max()), decay.rim_ang or 0.0) or 1.0
    axes.set_xlim(-0.02 * reach, 1.04 * reach)
    _draw_rim(axes, decay)


def _draw_rim(axes: Axes, decay: DecayProfile) -> None:
    """Tint beyond the distance from which elements count as on the rim, with the largest there."""
    if decay.rim_ang is None or decay.rim_mev is None:
        return
    axes.axvspan(
        decay.rim_ang, axes.get_xlim()[1], facecolor=palette.GAP_TINT, linewidth=0, zorder=0.2
    )
    axes.axvline(decay.rim_ang, color=palette.ODD, linewidth=0.9, linestyle=(0, (6, 3)))
    axes.annotate(
        f"rim: at most {mev(decay.rim_mev)}",
        (decay.rim_ang, 1.0),
        xycoords=("data", "axes fraction"),
        xytext=(0, 3),
        textcoords="offset points",
        ha="center",
        fontsize=8.5,
        color=palette.ODD,
    )


def _words(largest: FloatArray, decay: DecayProfile) -> str:
    shown = largest[largest > 0]
    ends = f"from {mev(float(shown[0]))} to {mev(float(shown[-1]))}" if len(shown) else "nowhere"
    rim = (
        f"Beyond {significant(decay.rim_ang)} angstrom the largest is {mev(decay.rim_mev)}."
        if decay.rim_ang is not None
        else "The rim is not known without a mesh."
    )
    return (
        f"Largest element at {len(shown)} distances, falling {ends}; "
        f"{int((largest <= 0).sum())} distances hold only zeros and are left out. {rim}"
    )
