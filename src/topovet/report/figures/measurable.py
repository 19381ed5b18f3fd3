"""What can be measured, drawn: contours of the surface band with its spin, Landau levels, films."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from topovet.boundary.cone_results import Cone, Contour, EnergyMap
from topovet.notation import mev, one_line, significant
from topovet.report.figures import palette
from topovet.report.figures.canvas import bare, drawing, new_figure, to_svg
from topovet.report.figures.surface import lightness_ramp

if TYPE_CHECKING:
    from matplotlib.axes import Axes

ARROW_SHARE = 0.16
"""Length of the arrow of a full spin over half of the figure's width."""

STEPS = 9
"""Steps of the density."""

FLOOR = 0.03
"""Densities below this share of the largest are left white."""

SPIN_FLOOR, LEAST_SPIN = 0.3, 0.1
"""Spins are drawn where the density exceeds this share of the largest of its panel, and where they
exceed this share of a full spin."""

BESIDE = 0.12
"""Arrows of the map stand this share of half its width outside of what they belong to."""

CROWDED = 0.17
"""Contours within this share of half the width get neither label nor arrows."""


def contours_figure(cone: Cone, termination: str, *, name: str = "contours") -> str:
    """Contours above and below the Dirac point with the spin of their states, as SVG text.

    Parameters
    ----------
    cone
        With contours.
    termination
        Name of the half-crystal.
    """
    above = [c for c in cone.contours if c.energy_ev > cone.pair.energy_ev]
    below = [c for c in cone.contours if c.energy_ev < cone.pair.energy_ev]
    sides = ((above, "above"), (below, "below"))
    reach = 1.25 * max(float(c.k_ang.max()) for c in cone.contours)
    with drawing(name):
        figure = new_figure(3.9 * len(sides) + 0.4, 3.9)
        panels = figure.subplots(1, len(sides), squeeze=False, sharey=True)[0]
        for axes, (contours, word) in zip(panels, sides, strict=True):
            _contours(axes, cone, contours, reach)
            none = "" if contours else ": none closes before bulk states"
            axes.set_title(f"{word} the Dirac point{none}", fontsize=9.5, loc="left")
        figure.suptitle(one_line(termination), fontsize=9.5, x=0.02, ha="left")
        panels[0].set_ylabel("k across  (1/Å)")
        return to_svg(
            figure,
            name,
            title=f"Constant-energy contours, {one_line(termination)}",
            description=_words(cone, termination),
        )


def energy_map_figure(
    found: EnergyMap, termination: str, dirac_ev: float, *, name: str = "energy-map"
) -> str:
    """Density at the Dirac point's energy and at another one with the spin, as SVG text.

    Parameters
    ----------
    found
        Map around the Dirac point.
    termination
        Name of the half-crystal.
    dirac_ev
        Energy of the Dirac point, from which energies count.
    """
    with drawing(name):
        figure = new_figure(3.9 * len(found.energies_ev) + 0.4, 4.1)
        panels = figure.subplots(1, len(found.energies_ev), squeeze=False, sharey=True)[0]
        for i, axes in enumerate(panels):
            offset = found.energies_ev[i] - dirac_ev
            title = f"{mev(1e3 * offset)} from the Dirac point" if offset else "at the Dirac point"
            axes.set_title(title, fontsize=9.5, loc="left")
            _density(axes, found, i)
        panels[0].set_ylabel("k across  (1/Å)")
        figure.suptitle(one_line(termination), fontsize=9.5, x=0.02, ha="left")
        words = ", ".join(mev(1e3 * (e - dirac_ev)) for e in found.energies_ev)
        return to_svg(
            figure,
            name,
            title=f"Constant-energy maps, {one_line(termination)}",
            description=f"Spectral density on the outermost lattice plane around the Dirac point, "
            f"at {words} from it, levels broadened by {mev(1e3 * found.broadening_ev)}; arrows: "
            "spin in the plane.",
        )


def _density(axes: Axes, found: EnergyMap, i: int) -> None:
    reach = float(found.k_ang[-1])
    bare(axes)
    axes.set_aspect("equal")
    axes.set_xlim(-reach, reach)
    axes.set_ylim(-reach, reach)
    axes.set_xlabel("k along b₁ of the surface  (1/Å)")
    axes.locator_params(nbins=5)
    smooth = np.linspace(0, 2 * np.pi, 121)
    columns = [_interpolated(found.azimuth_rad, row, smooth) for row in found.density[i].T]
    density = np.clip(np.stack(columns, axis=1), 0.0, None)
    largest = float(density.max())
    axes.contourf(
        found.k_ang * np.cos(smooth)[:, None],
        found.k_ang * np.sin(smooth)[:, None],
        density,
        levels=largest * np.geomspace(FLOOR, 1.0, STEPS),
        colors=lightness_ramp(STEPS + 1)[1:STEPS],
    )
    if found.spin is not None:
        _spins(axes, found, i, reach)


def _spins(axes: Axes, found: EnergyMap, i: int, reach: float) -> None:
    """Polarisation in the plane at every second azimuth, at the densest radius of each."""
    assert found.spin is not None
    rows = np.arange(0, len(found.azimuth_rad), 2)
    at = found.density[i][rows, 1:].argmax(axis=1) + 1
    dense = found.density[i][rows, at] > SPIN_FLOOR * found.density[i].max()
    rows, at = rows[dense], at[dense]
    spin = found.spin[i][rows, at] / found.density[i][rows, at, None]
    seen = np.hypot(spin[:, 0], spin[:, 1]) > LEAST_SPIN
    k = found.k_ang[at][seen] + BESIDE * reach
    _quiver(axes, k, found.azimuth_rad[rows][seen], spin[seen], reach)


def _contours(axes: Axes, cone: Cone, contours: list[Contour], reach: float) -> None:
    bare(axes)
    axes.set_aspect("equal")
    axes.set_xlim(-reach, reach)
    axes.set_ylim(-reach, reach)
    axes.set_xlabel("k along b₁ of the surface  (1/Å)")
    axes.locator_params(nbins=5)
    axes.axhline(0, color=palette.RULE, linewidth=0.7, zorder=0)
    axes.axvline(0, color=palette.RULE, linewidth=0.7, zorder=0)
    axes.plot([0], [0], marker="+", color=palette.INK, markersize=6)
    ordered = sorted(contours, key=lambda c: abs(c.energy_ev - cone.pair.energy_ev))
    colours = lightness_ramp(len(ordered) + 3)[2:]
    theta = np.concatenate([cone.azimuth_rad, cone.azimuth_rad + np.pi])
    smooth = np.linspace(0, 2 * np.pi, 181)
    for contour, colour in zip(ordered, colours, strict=False):
        k = _interpolated(theta, contour.k_ang, smooth)
        axes.plot(k * np.cos(smooth), k * np.sin(smooth), color=colour, linewidth=1.4)
        if contour.k_ang.mean() > CROWDED * reach:
            _label(axes, cone, contour)
            _arrows(axes, contour, theta, reach)


def _interpolated(theta: Any, values: Any, wanted: Any) -> Any:
    """Fourier interpolation of evenly spread values over the turn."""
    spectrum = np.fft.rfft(values) / len(values)
    order = np.arange(len(spectrum))
    weight = np.where((order == 0) | (2 * order == len(values)), 1.0, 2.0)
    phases = np.exp(1j * np.outer(wanted - theta[0], order))
    return (phases @ (weight * spectrum)).real


def _label(axes: Axes, cone: Cone, contour: Contour) -> None:
    offset = 1e3 * (contour.energy_ev - cone.pair.energy_ev)
    text = f"{offset:+.0f}".replace("-", "−")
    k = float(contour.k_ang.mean()) / np.sqrt(2)
    axes.annotate(
        text,
        (k, -k),
        fontsize=7.5,
        color=palette.INK,
        ha="center",
        va="center",
        bbox={"facecolor": palette.WHITE, "edgecolor": "none", "pad": 0.8},
    )


def _arrows(axes: Axes, contour: Contour, theta: Any, reach: float) -> None:
    if contour.spin is not None:
        _quiver(axes, contour.k_ang, theta, contour.spin, reach)


def _quiver(axes: Axes, k: Any, theta: Any, spin: Any, reach: float) -> None:
    radial, turn = spin[:, 0], spin[:, 1]
    axes.quiver(
        k * np.cos(theta),
        k * np.sin(theta),
        ARROW_SHARE * reach * (radial * np.cos(theta) - turn * np.sin(theta)),
        ARROW_SHARE * reach * (radial * np.sin(theta) + turn * np.cos(theta)),
        angles="xy",
        scale_units="xy",
        scale=1.0,
        width=0.006,
        color=palette.ODD,
        zorder=3,
    )


def _words(cone: Cone, termination: str) -> str:
    entries = ", ".join(
        f"{mev(1e3 * (c.energy_ev - cone.pair.energy_ev))}: {significant(float(c.k_ang.mean()))}"
        for c in cone.contours
    )
    return (
        f"Contours of the surface band of {one_line(termination)} around its Dirac point; energies "
        f"from there and mean radius in 1/angstrom: {entries}. Arrows: spin in the plane."
    )


def landau_figure(levels: list[Mapping[str, Any]], *, name: str = "landau") -> str:
    """Landau levels against the field, as SVG text."""
    indices = sorted({int(entry["n"]) for entry in levels})
    with drawing(name):
        figure = new_figure(4.4, 3.3)
        axes = figure.add_subplot()
        bare(axes)
        axes.set_xlabel("magnetic field  (T)")
        axes.set_ylabel("E − E(Dirac)  (meV)")
        for n in indices:
            own = sorted((e for e in levels if e["n"] == n), key=lambda e: e["field_T"])
            _level(axes, n, own)
        axes.set_xlim(left=0)
        return to_svg(
            figure,
            name,
            title="Landau levels of the surface band",
            description=f"Levels n = {indices[0]} to {indices[-1]} against the field; solid: from "
            "the area of the band as followed; dashed: of a straight cone with the slope at the "
            "Dirac point.",
        )


def _level(axes: Axes, n: int, own: list[Mapping[str, Any]]) -> None:
    field = np.array([0.0, *(e["field_T"] for e in own)])
    largest = float(field[-1])
    straight = float(own[-1]["straight_cone_meV"])
    fine = np.linspace(0, largest, 80)
    axes.plot(
        fine,
        straight * np.sqrt(fine / largest),
        color=palette.EMPTY,
        linewidth=0.9,
        linestyle=(0, (4, 2)),
    )
    band = [e["band_meV"] for e in own]
    known = [i for i, b in enumerate(band) if b is not None]
    end = straight
    if known:
        x = [0.0, *(float(own[i]["field_T"]) for i in known)]
        y = [0.0, *(float(band[i]) for i in known)]
        # levels rise as the square root of the field, nearly: straight lines over that
        axes.plot(
            fine[fine <= x[-1]],
            np.interp(np.sqrt(fine[fine <= x[-1]]), np.sqrt(x), y),
            color=palette.FILLED,
            linewidth=1.4,
        )
        end = y[-1] if x[-1] == largest else straight
    axes.annotate(
        f"n = {n}".replace("-", "−"),
        (largest, end),
        xytext=(4, 0),
        textcoords="offset points",
        va="center",
        fontsize=8.5,
    )


def films_figure(films: Mapping[str, Any], *, name: str = "films") -> str:
    """Gap of films against their thickness on a logarithmic scale, as SVG text."""
    thickness = np.array(films["thickness_nm"], dtype=float)
    gap = np.array(films["gap_meV"], dtype=float)
    shown = gap > 0
    with drawing(name):
        figure = new_figure(4.4, 3.3)
        axes = figure.add_subplot()
        bare(axes)
        axes.set_xlabel("thickness of the film  (nm)")
        axes.set_ylabel("gap at the Dirac momentum  (meV)")
        axes.set_yscale("log")
        axes.yaxis.set_major_formatter(lambda value, _: significant(value, 1))
        axes.yaxis.set_minor_formatter(lambda *_: "")
        axes.grid(axis="y", linewidth=0.6)
        axes.plot(
            thickness[shown],
            gap[shown],
            "o-",
            markersize=4,
            linewidth=0.9,
            color=palette.FILLED,
        )
        axes.set_xlim(left=0)
        words = ", ".join(
            f"{significant(t)} nm: {mev(g)}" for t, g in zip(thickness, gap, strict=True)
        )
        return to_svg(figure, name, title="Gap of thin films", description=f"{words}.")
