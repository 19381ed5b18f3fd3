"""Band representations in the report."""

from __future__ import annotations

from dataclasses import replace

import pytest

import invented_band_reps as band_reps
import invented_dossiers as invented
from topovet.invariants.band_reps.results import BandSet
from topovet.report.band_rep_words import indicator_group_name, indicator_value, limit_text, reading
from topovet.report.html import render_report


def _section(bands: BandSet) -> str:
    material = replace(invented.strong(), band_reps=band_reps.of(bands))
    page = render_report(material, {})
    start = page.index('<section id="bandreps"')
    return page[start : page.index("</section>", start)]


@pytest.mark.parametrize(
    ("bands", "said", "not_said"),
    [
        (band_reps.STRONG_SET, "cannot be localised", "fragile topology"),
        (band_reps.ATOMIC_SET, "localised on the atoms", "obstructed"),
        (band_reps.OBSTRUCTED_SET, "no atom sits", "localised on the atoms have"),
        (band_reps.FRAGILE_SET, "fragile topology", "cannot be localised"),
        (band_reps.CROSSING_SET, "without a crossing", "localised"),
        (band_reps.UNREAD_SET, "purity is 0.31", "topology"),
    ],
)
def test_each_class_is_read_in_plain_words(bands: BandSet, said: str, not_said: str) -> None:
    text = " ".join(reading(band_reps.of(bands)))
    assert said in text
    assert not_said not in text


def test_tables_of_levels_and_of_isolated_sets() -> None:
    section = _section(band_reps.STRONG_SET)
    assert "stable" in section
    for text in (
        "Z₂ × Z₄",
        "1 × Γ2−",
        "3 × K1",
        "and the line through it",
        "Γ – K",
        "4 × 1a",
        "1–4",
        "5–6",
    ):
        assert text in section
    assert "(highest filled)" in section


def test_what_could_not_be_read_is_said_and_escaped() -> None:
    section = _section(band_reps.UNREAD_SET)
    assert "at Γ &lt;b&gt; the purity is 0.31" in section.replace("At", "at")
    assert "<table" in section  # the other isolated sets


def test_words() -> None:
    assert indicator_group_name(()) == "trivial"
    assert indicator_value((1, 2)) == "(1, 2)"
    assert indicator_value(None) == "–"
    assert limit_text(band_reps.LIMIT) == (
        "2 × orbital 2a+ at (½, 0, 0) (no atom; site symmetry −3m, 3 per cell, 6 bands)"
    )
    trivial = replace(band_reps.of(band_reps.ATOMIC_SET), indicator_group=())
    assert "cannot show any stable topology" in " ".join(reading(trivial))


def test_without_spin_an_indicator_means_nodes() -> None:
    found = replace(band_reps.STRONG, spinful=False)
    text = " ".join(reading(found))
    assert "enforces nodes" in text
    assert "localised" not in text


def test_a_layer_has_a_layer_group() -> None:
    material = replace(
        invented.strong(), band_reps=replace(band_reps.of(band_reps.STRONG_SET), dimension=2)
    )
    section = render_report(material, {}).split('<section id="bandreps"')[1]
    assert "representations of layer group" in section
