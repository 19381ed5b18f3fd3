"""The map of the surface and its section in the report."""

from __future__ import annotations

import re
from dataclasses import replace

import numpy as np
import pytest

import invented_dossiers as invented
import invented_surfaces as surfaces
from topovet.report.figures import build_figures
from topovet.report.figures.surface import _oklab, lightness_ramp, surface_figure
from topovet.report.html import render_report
from topovet.report.material import ReportMaterial
from topovet.report.svg import inline_svg


def _material(**parts) -> ReportMaterial:
    maps = (surfaces.cone(), surfaces.cone("lower half, Te outermost"))
    given = {"surface": surfaces.witness((1, None, 0, None)), "surface_maps": maps}
    return replace(invented.strong(), **{**given, **parts})


def test_lightness_falls_in_equal_steps() -> None:
    lightness = [_oklab(colour)[0] for colour in lightness_ramp(10)]
    steps = np.diff(lightness)
    assert steps.max() < 0
    assert np.ptp(steps) < 0.01  # colours have 256 levels


@pytest.mark.parametrize("spinful", [True, False])
def test_the_map_names_termination_units_and_zero(spinful: bool) -> None:
    names = ("upper half, Te outermost", "lower half, Cd outermost")
    maps = tuple(surfaces.cone(name, spinful=spinful) for name in names)
    svg = surface_figure(maps, zero_ev=5.4, zero_name="the middle of the gap")
    inline_svg("surface", svg)
    for text in ("(0 0 1), upper half, Te outermost", "lower half, Cd outermost", "(eV)"):
        assert text in svg
    assert "the middle of the gap, 5.400 eV in the file" in svg
    assert "broadened by 0.0160 eV" in svg
    assert ("spin to the left of the path" in svg) == spinful
    assert len(svg) < 400_000


def test_the_same_map_gives_the_same_bytes() -> None:
    drawn = [surface_figure((surfaces.cone(),), zero_ev=5.4, zero_name="E(F)") for _ in range(2)]
    assert drawn[0] == drawn[1]


def test_hostile_names_stay_text() -> None:
    svg = surface_figure((surfaces.cone(invented.HOSTILE),), zero_ev=5.4, zero_name="E(F)")
    inline_svg("surface", svg)
    assert "<script" not in svg


def test_the_section_says_what_was_counted() -> None:
    material = _material()
    page = render_report(material, build_figures(material))
    section = re.search(r'<section id="surface".*?</section>', page, re.S)
    assert section is not None
    text = section[0]
    for words in ("likely cleavage plane", "Te outermost", "odd", "even", "2.61 Å", "1.20 meV"):
        assert words in text
    assert "<svg" in text


def test_a_surface_without_a_curve_says_why() -> None:
    material = _material(surface=surfaces.witness(None))
    page = render_report(material, build_figures(material))
    assert "This witness does not apply:" in page
    assert "no energy curve separates the projected bulk bands" in page


def test_an_unknown_termination_is_admitted() -> None:
    unnamed = surfaces.witness(
        (1, None, 0, None), cut_width_ang=None, terminations=("upper half", "lower half")
    )
    material = _material(surface=unnamed)
    assert "what ends up outermost is not known" in render_report(material, {})


def test_no_surface_no_section() -> None:
    material = invented.strong()
    page = render_report(material, build_figures(material))
    assert 'id="surface"' not in page


def test_a_map_alone_is_shown() -> None:
    """Without Kramers pairs nothing is counted on a surface, but it can be looked at."""
    material = _material(surface=None)
    page = render_report(material, build_figures(material))
    assert 'id="surface"' in page
    assert "Table of crossings" not in page
