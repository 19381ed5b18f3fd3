"""What to measure, in the report and on the terminal."""

from __future__ import annotations

from dataclasses import replace

import pytest

import invented_dossiers as invented
import invented_surfaces as surfaces
from invented_findings import changed
from topovet.report.figures import figure_makers
from topovet.report.figures.measurable import (
    contours_figure,
    energy_map_figure,
    films_figure,
    landau_figure,
)
from topovet.report.html import render_report
from topovet.report.material import ReportMaterial
from topovet.report.svg import inline_svg
from topovet.report.text import verdict_lines
from topovet.verdict.conclude import Conclusion
from topovet.verdict.document import InvariantsEntry
from topovet.verdict.measurable import measurable

FIGURES = ("energy-map", "contours", "landau", "films")


def _material(termination: str = "upper half, Te outermost", **gap: float) -> ReportMaterial:
    states = surfaces.states(termination)
    found = changed(
        gap={"vbm_ev": 5.0, "cbm_ev": 5.6, **gap},
        surface=surfaces.witness((1, None, 0, None)),
        surface_states=states,
    )
    numbers = measurable(found, Conclusion(InvariantsEntry(), "agree", "strong-ti", ()))
    material = invented.strong()
    verdict = replace(material.verdict, measurable=numbers)
    return replace(material, verdict=verdict, surface_states=states)


def _figures(material: ReportMaterial) -> dict[str, str]:
    makers = figure_makers(material)
    return {name: makers[name]() for name in FIGURES}


def test_the_section_names_units_termination_and_assumptions() -> None:
    material = _material()
    page = render_report(material, _figures(material))
    section = page[page.index('<section id="measurable"') :]
    section = section[: section.index("</section>")]
    for text in ("upper half, Te outermost", "(1/Å)", "F (T)", "10⁵ m/s", "meV", "Assumptions"):
        assert text in section
    # the contour at 100 meV: k_F = 0.1 / 3 per angstrom, F = hbar k_F^2 / 2e
    assert "0.0333" in section
    assert "36.6" in section
    for name in FIGURES:
        assert f'id="{name}-title"' in section
    assert 'href="#measurable"' in page


def test_a_dossier_without_numbers_has_no_section() -> None:
    assert 'id="measurable"' not in render_report(invented.strong(), {})


@pytest.mark.parametrize(("vbm", "word"), [(5.0, "exposed"), (5.3, "buried")])
def test_the_terminal_says_it_in_one_line(vbm: float, word: str) -> None:
    (line,) = [
        text
        for text in verdict_lines(_material(vbm_ev=vbm).verdict).splitlines()
        if text.startswith("  measure")
    ]
    assert word in line
    assert "m/s" in line
    assert "estimate" in line
    assert "measure" not in verdict_lines(invented.strong().verdict)


def test_a_semimetal_is_told_that_its_bulk_carries() -> None:
    material = _material(vbm_ev=5.6, cbm_ev=5.0)
    page = render_report(material, {})
    assert "the bulk carries at every temperature" in page


def test_figures_are_plain_and_the_same_each_time() -> None:
    material = _material()
    numbers = material.verdict.measurable
    cone = material.surface_states.cones[0]
    made = [
        (
            energy_map_figure(material.surface_states.energy_map, "upper half", 5.2),
            contours_figure(cone, "upper half"),
            landau_figure(numbers["landau_levels"]),
            films_figure(numbers["films"]),
        )
        for _ in range(2)
    ]
    assert made[0] == made[1]
    for name, svg in zip(FIGURES, made[0], strict=True):
        inline_svg(name, svg)
    energy_map, contours, landau, films = made[0]
    assert "200 meV from the Dirac point" in energy_map
    assert "broadened by 20.0 meV" in energy_map
    assert "(1/Å)" in contours
    assert "+100" in contours
    assert "−100" in contours
    assert "(T)" in landau
    assert "(meV)" in landau
    assert "(nm)" in films


def test_hostile_names_stay_text() -> None:
    material = _material(invented.HOSTILE)
    page = render_report(material, _figures(material))
    assert "<script" not in page
