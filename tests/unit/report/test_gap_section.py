"""The section on the gap: what is certain, the error budget, the map. Numbers invented."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

import invented_dossiers as invented
from topovet.report.figures import build_figures
from topovet.report.figures.gap_map import gap_map_figure, middle_text
from topovet.report.gap_words import certificate_lines, error_rows
from topovet.report.html import render_report
from topovet.report.material import ReportMaterial
from topovet.report.svg import inline_svg
from topovet.spectrum.proof.results import GapProof, IndirectGapProof
from topovet.spectrum.results import GapMap
from topovet.verdict.grade import RULES

PROOF = GapProof(
    quantity="direct",
    filling=18,
    proved_min_ev=0.191,
    attained_ev=0.2,
    k_frac=(0.0, 0.0, 0.5),
    status="proved",
    reason="",
    tolerance_ev=0.01,
    elsewhere_ev=0.191,
    n_boxes=1900,
    n_open=0,
    n_solves=2345,
    n_operations=12,
    symmetry_residual_ev=1e-4,
    symmetry_cost_ev=2e-4,
    rounding_ev=1e-9,
)
EDGE = replace(PROOF, quantity="valence", n_boxes=100)
INDIRECT = IndirectGapProof(0.14, 0.15, EDGE, EDGE, "proved")


def _map() -> GapMap:
    u, v = np.linspace(0.0, 1.0, 21), np.linspace(-0.5, 0.5, 17)
    gap = 0.2 + (u[:, None] - 0.5) ** 2 + v[None, :] ** 2
    return GapMap(2, 0.5, u, v, gap, (0.5, 0.0, 0.5))


def _material(**parts: object) -> ReportMaterial:
    given = {"gap_proof": PROOF, "indirect_proof": INDIRECT, "gap_map": _map(), **parts}
    return replace(invented.strong(), **given)


def test_what_is_proved_is_said_with_its_work() -> None:
    direct, indirect, mesh = certificate_lines(_material())
    assert "direct gap exceeds 0.191 eV at every k; 0.200 eV is attained" in direct
    assert "1,900 boxes, 2,345 eigenvalue problems, 12 images of each k" in direct
    assert "0.200 meV of symmetry residuals taken off" in direct
    assert "indirect gap exceeds 0.140 eV: 200 boxes bound both band edges" in indirect
    assert "points alone would have said" in mesh


def test_what_is_not_proved_is_said_with_its_reason() -> None:
    ended = replace(PROOF, status="budget ended", reason="40 boxes were left")
    early = certificate_lines(_material(gap_proof=ended))[0]
    assert early.endswith("The search ended early: 40 boxes were left.")
    nothing = certificate_lines(_material(gap_proof=replace(ended, proved_min_ev=0.0)))[0]
    assert nothing.startswith("No gap is proved (40 boxes were left); 0.200 eV is attained")
    overlap = replace(INDIRECT, proved_min_ev=-0.1)
    assert len(certificate_lines(_material(indirect_proof=overlap))) == 2


def test_bars_share_one_logarithmic_scale() -> None:
    verdict = invented.strong().verdict
    robustness = replace(
        verdict.robustness, radius_meV=100.0, errors_meV={"rounding": 0.1, "range": 10.0, "x": None}
    )
    rows = error_rows(replace(verdict, robustness=robustness))
    by_name = {row.name: row for row in rows}
    assert by_name["Sum"].mev == pytest.approx(10.1)
    assert [row.share for row in rows] == pytest.approx([40.0, 80.0, 0.0, 80.1, 100.0])
    assert [row.kind for row in rows] == ["part", "part", "part", "sum", "radius"]


def test_no_error_and_no_radius_leave_no_bar() -> None:
    verdict = invented.strong().verdict
    robustness = replace(verdict.robustness, radius_meV=None, errors_meV={"rounding": 0.0})
    assert {r.share for r in error_rows(replace(verdict, robustness=robustness))} == {0.0}


def test_the_section_shows_map_bars_and_the_rules_of_the_grade() -> None:
    material = _material()
    page = render_report(material, build_figures(material))
    assert page.count('class="bar"') >= 3
    assert "one reciprocal cell about the point (½, 0, ½)" in page
    for rule in RULES.values():
        assert rule[:40] in page


def test_the_map_has_units_and_the_same_bytes() -> None:
    crystal = invented.strong().crystal
    first, second = (gap_map_figure(_map(), crystal) for _ in range(2))
    assert first == second
    inline_svg("gap-map", first)
    assert "direct gap  (meV)" in first
    assert "(1/Å)" in first
    assert middle_text(_map()) == "(½, 0, ½)"
    assert len(first) < 150_000
