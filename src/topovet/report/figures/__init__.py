"""Results go in; figures come out as SVG text. The only place that loads matplotlib."""

from __future__ import annotations

from collections.abc import Callable
from functools import partial

from topovet.report.figures.bands import bands_figure, near_gap_window
from topovet.report.figures.decay import decay_figure
from topovet.report.figures.flow import flow_figure
from topovet.report.figures.gap_map import gap_map_figure
from topovet.report.figures.measurable import (
    contours_figure,
    energy_map_figure,
    films_figure,
    landau_figure,
)
from topovet.report.figures.nodes import nodes_figure
from topovet.report.figures.operations import operations_figure
from topovet.report.figures.surface import surface_figure
from topovet.report.figures.tasks import tasks_figure
from topovet.report.figures.tipping import tipping_figure
from topovet.report.figures.zone import zone_figure
from topovet.report.material import ReportMaterial

__all__ = [
    "bands_figure",
    "build_figures",
    "decay_figure",
    "figure_makers",
    "flow_figure",
    "gap_map_figure",
    "nodes_figure",
    "operations_figure",
    "surface_figure",
    "tasks_figure",
    "tipping_figure",
    "zone_figure",
]

_WORTH_A_CLOSER_LOOK_EV = 1.2
"""A gap that is wider than this shows well in the wide figure."""


def figure_makers(material: ReportMaterial) -> dict[str, Callable[[], str]]:
    """A maker of SVG text for every figure that the material allows, by name.

    The names are "zone", "bands", "bands-near-gap", "gap-map", "operations", "flow", "nodes",
    "surface", "energy-map", "contours", "landau", "films", "decay", "tipping" and "tasks";
    `render_report` places them, and each also stands alone as a file.
    """
    m = material
    trim = m.parity.trim if m.parity is not None else ()
    makers: dict[str, Callable[[], str]] = {"zone": lambda: zone_figure(m.crystal, trim)}
    if m.bands is not None:
        makers |= _band_makers(m)
    if m.decay.distances_ang:
        makers["decay"] = lambda: decay_figure(m.decay)
    group, wilson = m.group, m.wilson
    if group is not None and not all(t.missing for t in group.operations):
        makers["operations"] = lambda: operations_figure(group)
    if wilson is not None and wilson.planes:
        makers["flow"] = lambda: flow_figure(wilson.planes)
    if m.gap_map is not None:
        gap_map = m.gap_map
        makers["gap-map"] = lambda: gap_map_figure(gap_map, m.crystal)
    nodes = m.nodes
    if nodes is not None and (nodes.points or nodes.lines):
        makers["nodes"] = lambda: nodes_figure(m.crystal, nodes)
    if m.surface_maps:
        makers["surface"] = lambda: _surface(m)
    if m.verdict.robustness.tipping:
        makers["tipping"] = lambda: tipping_figure(m.verdict.robustness.tipping)
    makers |= _measurable_makers(m)
    if m.tasks:
        makers["tasks"] = lambda: tasks_figure(m.tasks)
    return makers


def build_figures(material: ReportMaterial) -> dict[str, str]:
    """Every figure that the material allows, by name: the SVG text of each."""
    return {name: make() for name, make in figure_makers(material).items()}


def _measurable_makers(m: ReportMaterial) -> dict[str, Callable[[], str]]:
    makers: dict[str, Callable[[], str]] = {}
    states, numbers = m.surface_states, m.verdict.measurable
    if not numbers.get("surface_band"):
        return makers  # the verdict does not stand behind the surface's numbers
    if states is not None and states.cones and states.cones[0].contours:
        cone = states.cones[0]
        name = states.terminations[cone.pair.side]
        makers["contours"] = lambda: contours_figure(cone, name)
        found = states.energy_map
        if found is not None:
            makers["energy-map"] = lambda: energy_map_figure(found, name, cone.pair.energy_ev)
    if numbers.get("landau_levels"):
        makers["landau"] = lambda: landau_figure(numbers["landau_levels"])
    films = numbers.get("films") or {}
    if "gap_meV" in films:
        makers["films"] = lambda: films_figure(films)
    return makers


def _surface(m: ReportMaterial) -> str:
    if m.electrons.fermi_ev is not None:
        name = "E(F)"
        return surface_figure(
            m.surface_maps, zero_ev=m.electrons.fermi_ev, zero_name=name, zero_symbol=name
        )
    assert m.gap is not None
    middle = 0.5 * (m.gap.vbm_ev + m.gap.cbm_ev)
    name = "the middle between the band edges"
    return surface_figure(m.surface_maps, zero_ev=middle, zero_name=name, zero_symbol="E(mid)")


def _band_makers(material: ReportMaterial) -> dict[str, Callable[[], str]]:
    assert material.bands is not None
    trim = material.parity.trim if material.parity is not None else ()
    gap = material.gap

    def make(window_ev: tuple[float, float] | None, name: str) -> Callable[[], str]:
        assert material.bands is not None
        return partial(
            bands_figure,
            material.bands,
            n_occ=material.electrons.filling,
            gap=gap,
            fermi_ev=material.electrons.fermi_ev,
            trim=trim,
            irreps=material.irreps,
            window_ev=window_ev,
            name=name,
        )

    makers = {"bands": make(None, "bands")}
    if gap is not None and abs(gap.cbm_ev - gap.vbm_ev) <= _WORTH_A_CLOSER_LOOK_EV:
        makers["bands-near-gap"] = make(near_gap_window(gap), "bands-near-gap")
    return makers
