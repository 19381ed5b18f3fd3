"""Fermi arcs in the verdict and on the page; a surface that contradicts the nodes."""

from __future__ import annotations

import json
from dataclasses import replace

import jsonschema
import pytest

import invented_dossiers as invented
from invented_arcs import OPEN, WRONG, survey
from invented_nodes import WEYL, findings_with
from topovet.report.html import render_report
from topovet.report.json_document import load_schema, verdict_json
from topovet.report.text import verdict_lines
from topovet.verdict.document import Verdict
from topovet.verdict.judge import judge


def _verdict(arcs) -> Verdict:
    findings = replace(findings_with(WEYL), arcs=arcs)
    return judge(findings, inputs=[], settings={}, task_seconds={})


def _page(verdict: Verdict) -> str:
    return render_report(replace(invented.strong(), verdict=verdict, nodes=WEYL), {})


@pytest.mark.parametrize("arcs", [survey(), OPEN], ids=["agree", "open"])
def test_arcs_are_written_and_shown_with_their_assumptions(arcs) -> None:
    verdict = _verdict(arcs)
    assert verdict.class_ == "weyl-semimetal"
    document = json.loads(verdict_json(verdict))
    jsonschema.Draft202012Validator(load_schema()).validate(document)
    block = document["measurable"]["fermi_arcs"]
    assert block["status"] == arcs.status
    assert block["assumptions"]
    assert [p["arcs_at_least"] for p in block["projections"]] == [1, 1, 0]
    # half of the gap of 0.2 eV on the surfaces around the nodes
    assert document["measurable"]["uncertainty"]["verdict_survives_meV"] == pytest.approx(100.0)
    page = _page(verdict)
    assert "Fermi arcs" in page
    assert "Te <i>outermost" not in page


def test_what_was_not_counted_says_so() -> None:
    counted, open_, left_out = _verdict(survey()).measurable["fermi_arcs"]["projections"]
    assert (counted["chirality_counted"], counted["arcs_upper"], counted["arcs_lower"]) == (1, 1, 3)
    assert (open_["chirality_counted"], open_["arcs_upper"]) == (None, None)
    assert "no energy curve" in open_["note"]
    assert "not counted" in left_out["note"]


def test_surface_levels_that_contradict_the_nodes_leave_the_class_open() -> None:
    verdict = _verdict(WRONG)
    assert verdict.class_ == "undetermined"
    (flag,) = [f for f in verdict.flags if f.code == "witnesses-disagree"]
    assert flag.severity == "error"
    assert "levels count 2" in flag.summary
    assert verdict.measurable == {}


def test_the_terminal_says_it_in_one_line() -> None:
    assert "Fermi arcs end at 2 projections on the surface (1 0 -1)" in verdict_lines(
        _verdict(survey())
    )
    assert "not confirmed" in verdict_lines(_verdict(OPEN))
    assert "not computed" in _verdict(None).measurable["note"]
