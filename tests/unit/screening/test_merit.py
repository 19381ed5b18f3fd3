"""The parts of the merit: what each value is, and that its words say so."""

from __future__ import annotations

from dataclasses import replace

import pytest

import invented_shortlists as invented
from invented_shortlists import SOUND
from topovet.report.handling import handling_cautions
from topovet.report.shortlist.records import Candidate, Gaps, Part
from topovet.screening.merit import PARTS, limiting_gap, merit_parts, rule_table
from topovet.screening.merit_rules import default_rules
from topovet.units import KT_ROOM_MEV


def _part(name: str, **changes: object) -> Part:
    candidate: Candidate = replace(SOUND, **changes)  # type: ignore[arg-type]
    return next(p for p in merit_parts(candidate, default_rules()) if p.name == name)


def test_room_temperature() -> None:
    """k_B = 8.617333262e-5 eV/K (CODATA 2018, exact in the revised SI); 300 K."""
    assert pytest.approx(25.85, abs=0.005) == KT_ROOM_MEV


def test_every_part_has_a_weight_and_a_sentence() -> None:
    rules = default_rules()
    assert tuple(rules.weights) == PARTS
    assert [name for name, _ in rule_table(rules).explained] == list(PARTS)
    assert sum(rules.weights.values()) == 100.0


@pytest.mark.parametrize("candidate", invented.campaign(200))
def test_values_and_points_stay_in_their_range(candidate: Candidate) -> None:
    if candidate.class_ == "undetermined":
        return
    for part in merit_parts(candidate, default_rules()):
        assert part.value is None or 0.0 <= part.value <= 1.0
        assert part.points == pytest.approx(part.weight * (part.value or 0.0))
        assert part.words


@pytest.mark.parametrize(
    ("gaps", "expected"),
    [
        (Gaps("insulator", 0.3, None, 0.2), (200.0, "indirect", False)),
        (Gaps("insulator", 0.3, 0.15, 0.2), (150.0, "direct", True)),
        (Gaps("insulator", 0.3, None, None), (300.0, "direct", False)),
        (Gaps("semimetal-direct-gap", 0.3, 0.29, -0.1), (-100.0, "indirect", False)),
        (Gaps("unresolved", None, None, None), None),
    ],
)
def test_the_gap_that_counts(gaps: Gaps, expected: tuple[float, str, bool] | None) -> None:
    found = limiting_gap(replace(SOUND, gaps=gaps))
    if expected is None:
        assert found is None
    else:
        assert found is not None
        assert found == (pytest.approx(expected[0]), *expected[1:])


def test_a_sampled_gap_counts_less_than_a_proved_one() -> None:
    sampled = _part("gap", gaps=Gaps("insulator", 0.1, None, None))
    proved = _part("gap", gaps=Gaps("insulator", 0.1, 0.1, 0.1))
    assert proved.value == pytest.approx(100 / KT_ROOM_MEV / 10)
    assert sampled.value == pytest.approx(0.8 * 100 / KT_ROOM_MEV / 10)
    assert "sampled, not proved" in sampled.words
    assert "(proved)" in proved.words


@pytest.mark.parametrize("indirect", [-0.3, 0.0])
def test_overlapping_bands_earn_nothing(indirect: float) -> None:
    part = _part("gap", gaps=Gaps("semimetal-direct-gap", 0.2, None, indirect))
    assert part.value == 0.0
    assert "the bulk conducts" in part.words


@pytest.mark.parametrize(
    ("name", "changes"),
    [
        ("gap", {"gaps": Gaps("unresolved", None, None, None)}),
        ("tipping", {"tipping_mev": None}),
        ("exposure", {"exposure_mev": None}),
        ("handling", {"elements": None}),
    ],
)
def test_what_is_not_known_counts_as_nothing_and_says_so(
    name: str, changes: dict[str, object]
) -> None:
    part = _part(name, **changes)
    assert part.value is None
    assert part.points == 0.0
    assert "not" in part.words


def test_measured_tipping_and_exposure_count() -> None:
    assert _part("tipping", tipping_mev=150.0).value == pytest.approx(0.5)
    assert _part("tipping", tipping_mev=3000.0).value == 1.0
    assert _part("exposure", exposure_mev=KT_ROOM_MEV).value == pytest.approx(0.5)
    buried = _part("exposure", exposure_mev=-40.0)
    assert buried.value == 0.0
    assert "buried 40.0 meV" in buried.words


def test_handling_names_the_elements_it_counts() -> None:
    part = _part("handling", elements=("Bi", "Cd", "Te"))
    assert handling_cautions(["Cd"])
    assert not handling_cautions(["Bi"])
    assert part.value == pytest.approx(0.25)
    assert part.words.endswith("Cd, Te")
    assert "not a clearance" in _part("handling", elements=("Bi",)).words
