"""Tipping points in verdict.json and on the page: schema, sentences, figure. Numbers invented."""

from __future__ import annotations

import json
from dataclasses import replace
from importlib import resources

import jsonschema
import pytest

import invented_dossiers as invented
from invented_findings import SOUND
from topovet.deformation.companion import CompanionTest
from topovet.invariants.tipping.results import (
    BY_COMPANION,
    BY_GAP,
    BY_PARITY,
    BY_SPIN_PART,
    SCALE,
    SHIFT,
    TippingPoint,
    TippingSearch,
)
from topovet.report.figures import figure_makers, tipping_figure
from topovet.report.html import render_report
from topovet.report.json_document import verdict_json
from topovet.report.text import verdict_lines
from topovet.screening.shortlist_fields import Fields
from topovet.screening.shortlist_reading import _tipping
from topovet.verdict.conclude import conclude
from topovet.verdict.document import Verdict
from topovet.verdict.judge import judge
from topovet.verdict.tipping import sentence

Z2, TRIVIAL = (1, 0, 0, 0), (0, 0, 0, 0)
GAMMA, L = ((0.0, 0.0, 0.0),), ((0.5, 0.0, 0.0), (0.0, 0.5, 0.0))

FLIP = TippingPoint(
    SHIFT, "Se p", "Bi p", "down", BY_PARITY, "flips", -0.35, -0.35, GAMMA, 2,
    Z2, TRIVIAL, 1, 0, spread=0.0,
)  # fmt: skip
HOLDS = TippingPoint(SHIFT, "Se p", "Bi p", "up", BY_PARITY, "holds", None, 2.0, z2_before=Z2)
SCALED = TippingPoint(
    SCALE, "", "", "down", BY_PARITY, "flips", 0.431, 0.431, GAMMA, 2, Z2, TRIVIAL, 1, 0
)
TWO = replace(FLIP, critical=0.06612, searched_to=0.06612, k=L, direction="up", z2_after=Z2)
CASES = {
    "flips to 0;(000) if Se p moves by −0.350 eV against Bi p": FLIP,
    "no flip until Se p moves by +2.000 eV against Bi p": HOLDS,
    "flips to 0;(000) if spin–orbit coupling is scaled by 0.431": SCALED,
    "1;(000) lasts until spin–orbit coupling is scaled by 0, where the gap closes": replace(
        SCALED, outcome="closes", critical=0.0, searched_to=0.0, k=(), z2_after=None
    ),
    "no flip until spin–orbit coupling is scaled by 0": replace(
        SCALED, outcome="holds", critical=None, searched_to=0.0
    ),
    "flips to Z₄ = 3 (Z₂ stays 1;(000)) if Se p moves by +0.0661 eV against Bi p": replace(
        TWO, z4_after=3
    ),
    "states of opposite parity change places at 2 TRIM if Se p moves by +0.0661 eV against Bi p; "
    "Z₂ and Z₄ stay, mirror Chern numbers were not counted": replace(
        TWO, outcome="exchange", z4_after=1
    ),
    "flips to mirror Chern numbers −2 on m(1 1 0) k=0 and 1 more (Z₂ stays 1;(000)) if Se p moves "
    "by +0.0661 eV against Bi p": replace(
        TWO, z4_after=1, mirror_after=(("m(1 1 0) k=0", -2), ("m(1 0 1) k=0", -2))
    ),
    "the direct gap closes if Se p moves by −0.350 eV against Bi p, and Z₂ is 0;(000) at "
    "−0.400 eV": replace(FLIP, method=BY_GAP, searched_to=-0.4),
    "the direct gap closes if spin–orbit coupling is scaled by 0.431; what follows has no gap "
    "again nearby": replace(SCALED, method=BY_GAP, outcome="closes", z2_after=None),
    "the sampled gap stays open until Se p moves by +2.000 eV against Bi p, and Z₂ is still "
    "1;(000) there": replace(HOLDS, method=BY_GAP),
    "no flip until Se p moves by +1.100 eV against Bi p; beyond this it is not settled": replace(
        HOLDS, outcome="open", searched_to=1.1
    ),
}


@pytest.mark.parametrize(("said", "point"), list(CASES.items()))
def test_sentences(said: str, point: TippingPoint) -> None:
    assert sentence(point) == said


def test_a_narrow_gap_at_the_trim_itself_is_no_closing_elsewhere() -> None:
    at_l = replace(FLIP, k=L, gap_on_the_way_ev=2e-4, gap_on_the_way_k=(-0.5, 0.0, 0.0))
    assert not at_l.may_close_before
    assert replace(at_l, gap_on_the_way_k=(-0.5, 0.02, 0.0)).may_close_before
    assert not replace(
        at_l, gap_on_the_way_k=(0.1, 0.0, 0.0), gap_on_the_way_ev=0.02
    ).may_close_before


def judged(*points: TippingPoint) -> Verdict:
    search = TippingSearch(points, ("I p: too little",), 1.5, 0.035, 800)
    findings = replace(SOUND, tipping=search)
    return judge(findings, inputs=(), settings={}, task_seconds={})


def test_entries_fit_the_schema_and_the_nearest_shift_comes_first() -> None:
    verdict = judged(SCALED, HOLDS, *CASES.values())
    document = json.loads(verdict_json(verdict))
    schema = json.loads(
        resources.files("topovet").joinpath("report/verdict.schema.json").read_text("utf-8")
    )
    jsonschema.Draft202012Validator(schema).validate(document)
    entries = document["robustness"]["tipping"]
    assert entries[0]["distance_meV"] == pytest.approx(66.12)
    assert entries[0]["critical_eV"] == pytest.approx(0.06612)
    assert all(e["distance_meV"] is None for e in entries if e["parameter"] == SCALE)
    assert {e["class_after"] for e in entries} == {None, "strong-ti"}
    read = _tipping(Fields("verdict.json", document["robustness"], "robustness"))
    assert read == pytest.approx(66.12)  # what the shortlist makes of it


def test_a_class_that_parities_settle_is_named_and_no_other() -> None:
    weak = replace(FLIP, z2_after=(0, 1, 1, 1))
    crystalline = replace(FLIP, mirror_after=(("m(1 1 0) k=0", 2),))
    classes = [e["class_after"] for e in judged(weak, crystalline, FLIP).robustness.tipping]
    assert sorted(map(str, classes)) == ["None", "crystalline-ti", "weak-ti"]


def test_nothing_flips_where_no_verdict_stands() -> None:
    """Points that start from other indices than the verdict's are left out."""
    assert judged(replace(FLIP, z2_before=TRIVIAL)).robustness.tipping == ()
    search = TippingSearch((FLIP,), (), 1.5, 0.035, 800)
    silent = replace(SOUND, tipping=search, parity=None)
    assert conclude(silent, ()).invariants.z2 is None
    verdict = judge(silent, inputs=(), settings={}, task_seconds={})
    assert verdict.robustness.tipping == ()
    assert "tipping" not in verdict_lines(verdict)


def test_terminal_names_the_nearest_of_each_kind() -> None:
    lines = verdict_lines(judged(replace(FLIP, critical=-0.9), FLIP, SCALED))
    assert "flips to 0;(000) if Se p moves by -0.350 eV against Bi p; flips to" in lines
    nothing = verdict_lines(judged(HOLDS))
    assert "no flip until Se p moves by +2.000 eV" in nothing


def test_page_shows_table_figure_and_what_was_not_asked() -> None:
    near = replace(FLIP, critical=-0.0421, searched_to=-0.0421, group="Se <p>")
    verdict = judged(near, HOLDS, SCALED)
    material = replace(
        invented.strong(),
        verdict=verdict,
        tipping=TippingSearch((near, HOLDS, SCALED), ("I p: too little",), 1.5, 0.035, 800),
    )
    page = render_report(material, {"tipping": figure_makers(material)["tipping"]()})
    assert "The nearest is 42.1 meV away." in page
    assert "Not asked: I p: too little." in page
    assert "Se &lt;p&gt;" in page
    assert "Se <p>" not in page
    assert "tipping-title" in page
    assert 'href="#tipping"' in page
    assert 'id="tipping"' not in render_report(invented.strong(), {})


FITS = CompanionTest("without/X_hr.dat", True, "", 0.942, 12.3, -40.0, 0.1)
UNLIKE = CompanionTest("<b>/X_hr.dat", False, "<b>/X_hr.dat is spinful")


@pytest.mark.parametrize(
    ("companion", "scale_from", "says"),
    [
        (
            FITS,
            BY_COMPANION,
            "at a spin-orbit scale of 0 H is the spinless companion without/X_hr.dat, which "
            "differs by up to 12.3 meV from H without its spin-dependent part (sampled k; zero of "
            "energy 40.0 meV apart and left out; hoppings overlap by 0.942 or more)",
        ),
        (
            UNLIKE,
            BY_SPIN_PART,
            "companion not used, because <b>/X_hr.dat is spinful; the spin-dependent part of H is "
            "scaled instead",
        ),
        (FITS, None, "companion not used, because no tipping points were looked for"),
    ],
)
def test_companion_is_told_of_in_json_terminal_and_page(
    companion: CompanionTest, scale_from: str | None, says: str
) -> None:
    search = None
    if scale_from is not None:
        search = TippingSearch((FLIP, SCALED), (), 1.5, 0.035, 800, scale_from)
    findings = replace(SOUND, tipping=search, companion=companion)
    verdict = judge(findings, inputs=(), settings={}, task_seconds={})
    document = json.loads(verdict_json(verdict))
    schema = resources.files("topovet").joinpath("report/verdict.schema.json").read_text("utf-8")
    jsonschema.Draft202012Validator(json.loads(schema)).validate(document)
    entry = document["robustness"]["companion"]
    assert entry["used"] == (scale_from == BY_COMPANION)
    assert entry["difference_meV"] == companion.difference_mev
    turned = {t["parameter"]: t["spin_orbit_from"] for t in document["robustness"]["tipping"]}
    assert turned == ({} if scale_from is None else {SHIFT: None, SCALE: scale_from})
    assert f"spinless   {says}" in verdict_lines(verdict)
    page = render_report(replace(invented.strong(), verdict=verdict, tipping=search), {})
    told = says[1:].replace("<b>", "&lt;b&gt;").replace("-", "–", says.count("spin-orbit"))
    assert told in page


def test_figure_has_a_bar_for_every_direction_and_says_it_in_words() -> None:
    beyond = replace(FLIP, method=BY_GAP, searched_to=-0.4, group="Te p", against="all others")
    entries = judged(FLIP, HOLDS, beyond, SCALED).robustness.tipping
    svg = tipping_figure(entries)
    for said in ("Se p", "Te p", "spin–orbit", "shift of on-site energies (eV)", "0;(000)"):
        assert f">{said}<" in svg
    assert all(str(entry["sentence"]) in svg for entry in entries)
    assert svg == tipping_figure(entries)
