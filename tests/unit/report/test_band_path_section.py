"""Connections along the path in report and document."""

from __future__ import annotations

import json
from dataclasses import replace

import jsonschema

import invented_dossiers as invented
from invented_band_path import AXIS, CONNECTIONS, PLAIN
from invented_findings import changed
from topovet.invariants.band_reps.path_results import PathConnections
from topovet.report.band_path_words import (
    connection_rows,
    crossing_sentences,
    plain_segments,
    tabled_segments,
)
from topovet.report.html import render_report
from topovet.report.json_document import load_schema, verdict_json
from topovet.verdict.band_reps import band_representations_entry


def _section(found: PathConnections) -> str:
    page = render_report(replace(invented.strong(), connections=found), {})
    start = page.index('<section id="connections"')
    return page[start : page.index("</section>", start)]


def test_what_crosses_at_the_filling_comes_first() -> None:
    across, filled = crossing_sentences(CONNECTIONS)
    assert "the gap closes there" in across
    assert "k = (0, 0, 0.21), −0.123 eV" in across
    assert "bands 5–8; 1ab comes from below, 2b from above" in across
    assert "within 0.500 meV" in across
    opened = replace(AXIS.crossings[1], splitting_mev=7.0)
    (text,) = crossing_sentences(PathConnections(2, (replace(AXIS, crossings=(opened,)),)))
    assert "broken symmetry keeps the gap open" in text
    assert "two highest filled levels cross (bands 3–6" in filled


def test_levels_between_the_same_ends_share_a_row() -> None:
    rows = connection_rows(AXIS)
    assert len(rows) == 3
    assert rows[0].kinds == "1ab"
    assert rows[0].approach_mev is None
    assert rows[2].kinds == "2b (not told apart from the next), 1ab"
    assert rows[2].approach_mev == 0.3


def test_levels_of_one_kind_that_are_not_told_apart_have_a_table() -> None:
    near = replace(PLAIN, connections=AXIS.connections[1:2])
    found = PathConnections(2, (PLAIN, near))
    assert tabled_segments(found) == (near,)
    assert plain_segments(found) == "A – L"


def test_section() -> None:
    section = _section(CONNECTIONS)
    for text in (
        "24 operations",
        "in order of energy, on A – L.",
        "symmetry −6m2, levels 1ab, 2b",
        "5–6 (filled)",
        "7–10 (empty)",
        "5–6 (filled)",
        "at most 0.400 meV",
    ):
        assert text in section
    assert section.count("<table") == 1


def test_entry_meets_the_schema() -> None:
    verdict = invented.strong().verdict
    entry = band_representations_entry(changed(connections=CONNECTIONS))
    assert entry.status == "not-applicable"
    witnesses = replace(verdict.witnesses, band_representations=entry)
    document = json.loads(verdict_json(replace(verdict, witnesses=witnesses)))
    jsonschema.Draft202012Validator(load_schema()).validate(document)
    written = document["witnesses"]["band_representations"]["connections"]
    assert written["segments"][0]["crossings"][1]["levels"] == ["1ab", "2b"]
    assert written["segments"][0]["connections"][0]["to"]["level"] == ""
    assert written["segments"][1]["levels"] == ["1ab"]
