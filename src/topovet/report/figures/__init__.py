"""Results go in; figures come out as SVG text. The only place that loads matplotlib."""

from __future__ import annotations

from topovet.report.figures.bands import bands_figure, near_gap_window
from topovet.report.figures.decay import decay_figure
from topovet.report.figures.flow import flow_figure
from topovet.report.figures.tasks import tasks_figure
from topovet.report.figures.zone import zone_figure
from topovet.report.material import ReportMaterial

__all__ = [
    "bands_figure",
    "build_figures",
    "decay_figure",
    "flow_figure",
    "tasks_figure",
    "zone_figure",
]

_WORTH_A_CLOSER_LOOK_EV = 1.2
"""A gap that is wider than this shows well in the wide figure."""


def build_figures(material: ReportMaterial) -> dict[str, str]:
    """Every figure that the material allows, by name: the SVG text of each.

    The names are "zone", "bands", "bands-near-gap", "flow", "decay" and "tasks"; `render_report`
    places them, and each also stands alone as a file.
    """
    trim = material.parity.trim if material.parity is not None else ()
    figures = {"zone": zone_figure(material.crystal, trim)}
    if material.bands is not None:
        figures |= _band_figures(material)
    if material.decay.distances_ang:
        figures["decay"] = decay_figure(material.decay)
    if material.wilson is not None and material.wilson.planes:
        figures["flow"] = flow_figure(material.wilson.planes)
    if material.tasks:
        figures["tasks"] = tasks_figure(material.tasks)
    return figures


def _band_figures(material: ReportMaterial) -> dict[str, str]:
    assert material.bands is not None
    trim = material.parity.trim if material.parity is not None else ()
    gap, filling = material.gap, material.electrons.filling
    fermi = material.electrons.fermi_ev
    wide = bands_figure(material.bands, n_occ=filling, gap=gap, fermi_ev=fermi, trim=trim)
    if gap is None or abs(gap.cbm_ev - gap.vbm_ev) > _WORTH_A_CLOSER_LOOK_EV:
        return {"bands": wide}
    near = bands_figure(
        material.bands,
        n_occ=filling,
        gap=gap,
        fermi_ev=fermi,
        trim=trim,
        window_ev=near_gap_window(gap),
        name="bands-near-gap",
    )
    return {"bands": wide, "bands-near-gap": near}
