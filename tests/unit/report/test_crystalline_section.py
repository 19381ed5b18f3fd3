"""Mirror Chern numbers, indicators and lower groups of bands in the report."""

from __future__ import annotations

from dataclasses import replace

import pytest

import invented_dossiers as invented
from topovet.invariants.lower_groups import LowerGroup, LowerGroups
from topovet.invariants.mirror_witness import MirrorPlane, MirrorWitness
from topovet.report.html import render_report
from topovet.report.indicator_words import direction, indicator_name, indicator_note, open_z2
from topovet.report.material import ReportMaterial
from topovet.report.text import verdict_lines


def mirror_plane(name: str, number: int | None, **changes: object) -> MirrorPlane:
    plane = MirrorPlane(
        name=name,
        normal_cart=(0.7071, -0.7071, 0.0),
        through=(0.0, 0.0, 0.0),
        row=(1, -1, 0),
        half=False,
        judged_mev=0.021,
        status="ok",
        reason="",
        number=number,
        taken_from="m(1 1 0) k=0",
        evidence=None,
    )
    return replace(plane, **changes)  # type: ignore[arg-type]


MIRRORS = MirrorWitness(
    "unresolved",
    "m(0 0 1) k=0: the budget ended",
    (
        mirror_plane("m(1 -1 0) k=0", -2),
        mirror_plane("m(0 1 0) k=G/2", 0),
        mirror_plane(
            "m(0 0 1) k=0", None, status="unresolved", reason="the budget <ended>", taken_from=""
        ),
    ),
    ("glides: m(1 0 0)",),
    1234,
)
LOWER = LowerGroups(
    (
        LowerGroup(
            2, 0.31, (0.0, 0.0, 0.5), -0.2, "ok", "", (1, 0, 0, 0), 3, (1, 0, 0, 0), None, 4321
        ),
        LowerGroup(
            4, 2e-5, (0.1, 0.0, 0.5), -0.9, "closed", "it closes & ends", None, None, None, None, 99
        ),
    ),
    3,
    (),
)


def material() -> ReportMaterial:
    made = invented.strong()
    invariants = replace(
        made.verdict.invariants,
        indicators={"z4": 1, "z2w1": 0, "z8": 5, "z4m k=0": 2},
        mirror_chern={"m(1 -1 0) k=0": -2, "m(0 1 0) k=G/2": 0},
    )
    verdict = replace(made.verdict, invariants=invariants)
    return replace(made, verdict=verdict, mirror=MIRRORS, lower=LOWER)


def test_every_plane_and_indicator_is_shown() -> None:
    html = render_report(material(), {})
    for text in ("m(1 −1 0) k=0", "−2", "(0.707, −0.707, 0)", "as m(1 1 0) k=0, by symmetry"):
        assert text in html
    assert "the budget &lt;ended&gt;" in html
    assert "Not used: glides: m(1 0 0)." in html
    for text in ("Z₄,m, k = 0", "Z₂,w1", "Z₈"):
        assert text in html
    assert "Mirror Chern numbers of 2 planes: m(1 -1 0) k=0: −2." in html


def test_lower_groups_are_shown() -> None:
    html = render_report(material(), {})
    assert "Topology of lower groups of bands" in html
    assert "it closes &amp; ends" in html
    assert "4420 k-points" in html


def test_nothing_is_shown_where_nothing_was_found() -> None:
    html = render_report(invented.strong(), {})
    assert 'id="crystalline"' not in html
    assert 'id="lower"' not in html


def test_the_terminal_names_what_is_not_zero() -> None:
    assert "mirror Chern numbers m(1 -1 0) k=0: -2" in verdict_lines(material().verdict)
    made = material()
    zero = replace(made.verdict.invariants, mirror_chern={"m(0 1 0) k=0": 0})
    lines = verdict_lines(replace(made.verdict, invariants=zero))
    assert "mirror Chern numbers 0 on 1 plane\n" in lines


@pytest.mark.parametrize(
    ("key", "name", "word"),
    [
        ("z4", "Z₄", "κ modulo 4"),
        ("z2w3", "Z₂,w3", "ν3"),
        ("z6m k=G/2", "Z₆,m, k = G/2", "modulo 6"),
        ("z12", "Z₁₂", "from memory"),
        ("s4", "S₄ index", "strong"),
    ],
)
def test_indicator_words(key: str, name: str, word: str) -> None:
    assert indicator_name(key) == name
    assert word in indicator_note(key)


def test_small_words() -> None:
    assert open_z2((1, None, None, 0)) == "1;(––0)"
    assert open_z2((None,) * 4) == "–"
    assert open_z2((0,)) == "0"
    assert direction((-0.0, 1.0, -0.57735)) == "(0, 1, −0.577)"
