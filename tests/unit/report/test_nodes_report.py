"""Nodes on the page: section, tables, drawing of the zone, one line on the terminal."""

from __future__ import annotations

import json
from dataclasses import replace

import jsonschema
import numpy as np
import pytest

from invented_nodes import INCOMPLETE, WEYL, line, material_with, point, search
from topovet.model.crystal import Crystal
from topovet.report.figures import figure_makers
from topovet.report.figures.nodes import nodes_figure
from topovet.report.html import render_report
from topovet.report.json_document import load_schema, verdict_json
from topovet.report.svg import inline_svg
from topovet.report.text import verdict_lines

RING = search(
    lines=(line(), line(winding=(0, 0, 1), berry_phase_pi=None)),
    images=np.array([np.eye(3), -np.eye(3)], dtype=np.int64),
)
CROWD = search(*[point((-1) ** i, 0.02 * i - 0.2, orbit=i // 2) for i in range(20)])
LAYER = search(
    point(None, 0.0, k=(1 / 3, 1 / 3, 0.0), kind="dirac", berry_phase_pi=1.0, protection="x"),
    charge_sum=None,
)


@pytest.mark.parametrize(
    "nodes", [WEYL, INCOMPLETE, RING, CROWD], ids=["weyl", "open", "ring", "many"]
)
def test_document_meets_the_schema_and_the_page_holds_the_nodes(nodes) -> None:
    material = material_with(nodes)
    document = json.loads(verdict_json(material.verdict))
    jsonschema.Draft202012Validator(load_schema()).validate(document)
    assert len(document["nodes"]) == len(nodes.points) + len(nodes.lines)
    figures = {"nodes": figure_makers(material)["nodes"]()}
    page = render_report(material, figures)
    assert 'id="nodes"' in page
    assert ("<b>The list may be incomplete" in page) == (not nodes.complete)
    assert figures["nodes"].count("<svg") == 1


def test_velocities_in_metres_per_second() -> None:
    """1 eV angstrom / hbar = 1.519e5 m/s."""
    entry = json.loads(verdict_json(material_with(WEYL).verdict))["nodes"][0]
    assert entry["velocities_m_s"][0] == pytest.approx(3 * 1.519267e5, rel=1e-6)


def test_signs_are_drawn_and_said() -> None:
    svg = nodes_figure(material_with(WEYL).crystal, WEYL)
    inline_svg("nodes", svg)
    assert "chirality +1" in svg
    assert "chirality -1" in svg
    assert svg == nodes_figure(material_with(WEYL).crystal, WEYL)


def test_a_layer_is_drawn_flat() -> None:
    layer = Crystal(np.diag([4.0, 4.0, 20.0]), ("C",), np.zeros((1, 3)), (True, True, False))
    inline_svg("nodes", nodes_figure(layer, LAYER))


def test_terminal_says_what_was_found() -> None:
    text = verdict_lines(material_with(WEYL).verdict)
    assert "2 Weyl points (chiralities ±1)" in text
    assert "elsewhere the gap is proved > 2.00 meV" in text
    assert "maybe more" in verdict_lines(material_with(INCOMPLETE).verdict)


def test_no_section_without_a_search() -> None:
    material = material_with(WEYL)
    bare = replace(material, nodes=None)
    assert 'id="nodes"' not in render_report(bare, {})
