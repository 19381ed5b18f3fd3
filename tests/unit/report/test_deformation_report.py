"""Document, page, text and figure of a walk, from made-up results."""

from __future__ import annotations

import json
from dataclasses import replace
from xml.etree import ElementTree

import jsonschema
import numpy as np
import pytest

from topovet.deformation.conclusion import conclude
from topovet.deformation.results import (
    Averaging,
    Closing,
    Comparison,
    GapSampleAt,
    ParityExchange,
    ProvedStretch,
    Segment,
    SideIndices,
    TrimLevels,
    Walk,
)
from topovet.report.deformation.document import deformation_json, load_deformation_schema
from topovet.report.deformation.html import render_deformation
from topovet.report.deformation.material import DeformationMaterial, EndEntry
from topovet.report.deformation.text import deformation_lines
from topovet.report.figures.deformation import deformation_figure

GAMMA = (0.0, 0.0, 0.0)
EXCHANGE = ParityExchange(0.4, GAMMA, 12, 10, 5.25)
POINT = Closing("point", 0.4, 0.3999, 0.4001, GAMMA, 2e-11, (EXCHANGE,))
RANGE = Closing("interval", 0.5, 0.45, 0.55, (0.1, 0.02, 0.47), 1e-12, ())


def _side(lam: float, strong: int, **changes: object) -> SideIndices:
    z2 = (strong, 0, 0, 0)
    side = SideIndices(lam, z2, strong, None, z2, None, (), "agree")
    return replace(side, **changes)  # type: ignore[arg-type]


def _walk(*closings: Closing, **changes: object) -> Walk:
    edges = [0.0, *(e for c in closings for e in (c.lo, c.hi)), 1.0]
    ranges = list(zip(edges[::2], edges[1::2], strict=True))
    segments = [
        Segment(lo, hi, tuple(_side(x, int(lo > 0)) for x in (0.0, 1.0) if x in (lo, hi)), 0.99)
        for lo, hi in ranges
    ]
    lams = np.linspace(0, 1, 5)
    levels = TrimLevels(
        GAMMA,
        lams,
        np.stack([5.5 - lams, 9 + lams], axis=1),
        np.stack([4.7 + lams, 1 + lams], axis=1),
        np.sort(np.stack([4.7 + lams, 5.5 - lams], axis=1), axis=1),
    )
    made = Walk(
        comparison=Comparison(
            *(0.99, (0.98, float("nan")), 0, "declared", 183, 183, (0.97, 0.99, 0.99), 0.0),
            *(0.3, ("Bi -> Sb",), ""),
        ),
        filling=18,
        samples=tuple(GapSampleAt(float(x), abs(0.3 * (x - 0.4)), GAMMA) for x in lams),
        closings=closings,
        exchanges=tuple(e for c in closings for e in c.exchanges),
        exchange_note="",
        stretches=tuple(ProvedStretch(lo, hi, 0.02, 0.05) for lo, hi in ranges),
        n_solves=1000,
        proof_note="",
        resolution=1 / 256,
        segments=tuple(segments),
        levels=(levels,),
        time_reversal=True,
        inversion=True,
        averagings=(Averaging(12, 80.0, 20.0), Averaging(12, 0.1, 0.01)),
        mesh=(4, 4, 4),
        effort="standard",
    )
    return replace(made, **changes)  # type: ignore[arg-type]


def _material(walk: Walk, name: str = "GX-1", doubts: tuple[str, ...] = ()) -> DeformationMaterial:
    end = EndEntry(name, "Sb2Se3", "trivial", (0, 0, 0, 0), "A", (), (("a_hr.dat", "0" * 64, 7),))
    return DeformationMaterial(
        walk, conclude(walk, doubts), end, end, {"filling": None}, "0", {"numpy": "2"}
    )


WALKS = {
    "open": _walk(),
    "closes": _walk(POINT),
    "interval": _walk(RANGE, levels=(), inversion=False, exchange_note="A has no inversion"),
    "quick": _walk(POINT, stretches=(), proof_note="gaps are sampled, not proved"),
}


@pytest.mark.parametrize("name", WALKS)
def test_documents_meet_the_schema(name: str) -> None:
    schema = load_deformation_schema()
    jsonschema.Draft202012Validator.check_schema(schema)
    document = json.loads(deformation_json(_material(WALKS[name])))
    jsonschema.Draft202012Validator(schema).validate(document)
    assert document["comparison"]["function_overlaps"] == [0.98, None]


def test_a_transition_is_said_in_full() -> None:
    text = deformation_lines(_material(WALKS["closes"]))
    assert "closes at lambda = 0.4000, k = (0, 0, 0)" in text
    assert "go from 12 to 10" in text
    assert "Z2 = 0;(000) becomes 1;(000), Z4 = 0 becomes 1" in text
    assert "half of the gap there or more" in text
    assert text.isascii()


def test_an_open_way_is_one_phase_only_where_it_is_proved() -> None:
    assert "both ends are one phase" in conclude(WALKS["open"]).sentence
    sampled = conclude(_walk(stretches=(), proof_note="sampled")).sentence
    assert "which is no proof" in sampled
    assert "one phase" not in sampled


def test_indices_that_differ_across_no_closing_leave_all_undetermined() -> None:
    segment = Segment(0.0, 1.0, (_side(0.0, 0), _side(1.0, 1)), 0.0)
    found = conclude(_walk(segments=(segment,), stretches=()))
    assert (found.outcome, found.changes) == ("undetermined", None)
    assert "one was missed" in found.doubts[0]


def test_witnesses_that_disagree_leave_all_undetermined() -> None:
    torn = _side(0.0, 0, wilson_z2=(1, 0, 0, 0), agreement="disagree")
    assert torn.z2 is None
    found = conclude(_walk(segments=(Segment(0.0, 1.0, (torn, _side(1.0, 0)), 1.0),)))
    assert found.outcome == "undetermined"


def test_a_doubt_about_an_end_takes_back_what_changes() -> None:
    found = conclude(WALKS["closes"], ("GX-1 carries gap-closes of severity error",))
    assert found.changes is None
    assert "What changes is open." in found.sentence


@pytest.mark.parametrize("name", WALKS)
def test_figures_say_what_they_show(name: str) -> None:
    root = ElementTree.fromstring(deformation_figure(_material(WALKS[name])))
    words = "".join(root.itertext())
    assert "smallest direct gap" in words
    assert ("gapless" in words) == (name == "interval")
    assert ("even parity" in words) == (name != "interval")
    assert ("proved: " in words) == (name != "quick")


def test_pages_escape_what_comes_from_a_case() -> None:
    hostile = '<script>alert(1)</script>"&\x07'
    material = _material(WALKS["closes"], name=hostile, doubts=(f"{hostile} is doubtful",))
    page = render_deformation(material, deformation_figure(material))
    assert "<script" not in page
    assert "\x07" not in page
    assert "&lt;script&gt;" in page
    assert "default-src 'none'" in page
    assert page == render_deformation(material, deformation_figure(material))


def test_a_page_holds_outcome_grounds_and_ends() -> None:
    material = _material(WALKS["interval"])
    page = render_deformation(material, deformation_figure(material))
    assert "A gapless range lies between" in page
    assert "A has no inversion" in page
    assert 'href="A/report.html"' in page
    assert "0" * 64 in page
