"""The order: tiers that no weight crosses, merit within them, the same order every time."""

from __future__ import annotations

from dataclasses import replace

from hypothesis import given, settings
from hypothesis import strategies as st

import invented_shortlists as invented
from invented_shortlists import DISPUTED, SOUND
from topovet.report.shortlist.records import TIERS, Gaps
from topovet.screening.merit_rules import MeritRules, default_rules
from topovet.screening.shortlist_ranking import points, rank

CAMPAIGN = invented.campaign(80)


@st.composite
def _any_rules(draw: st.DrawFn) -> MeritRules:
    """Any rules that a file may give."""
    share = st.floats(0.0, 1.0)
    tables = {
        name: {key: draw(share) for key in table} for name, table in default_rules().tables.items()
    }
    tables["weights"] = {key: draw(st.floats(0.0, 1000.0)) for key in tables["weights"]}
    tables["gap"]["full_kT"] = draw(st.floats(0.01, 100.0))
    tables["exposure"]["full_kT"] = draw(st.floats(0.01, 100.0))
    tables["tipping"]["full_meV"] = draw(st.floats(0.01, 1e4))
    return MeritRules(tables, "drawn")


@settings(max_examples=60, deadline=None)
@given(rules=_any_rules(), order=st.randoms(use_true_random=False))
def test_no_weight_lifts_a_case_out_of_its_tier(rules: MeritRules, order: object) -> None:
    shuffled = list(CAMPAIGN)
    order.shuffle(shuffled)  # type: ignore[attr-defined]
    rows = rank(shuffled, rules)
    assert [row.rank for row in rows] == list(range(1, len(rows) + 1))
    tiers = [TIERS.index(row.tier) for row in rows]
    assert tiers == sorted(tiers)
    for row in rows:
        undetermined = row.candidate.class_ == "undetermined"
        assert (row.tier == "undetermined") == undetermined == (row.merit is None)
    for tier in TIERS[:3]:
        merits = [round(row.merit or 0.0, 9) for row in rows if row.tier == tier]
        assert merits == sorted(merits, reverse=True)
    assert rows == rank(CAMPAIGN, rules)


def test_undetermined_cases_say_why_and_have_no_merit() -> None:
    (row,) = rank([DISPUTED], default_rules())
    assert row.merit is None
    assert row.parts == ()
    assert "Undetermined" in row.reasons[0]
    assert row.reasons[1] == DISPUTED.obstacle
    assert "Confirmed cause: filling off" in row.reasons[2]


def test_a_confirmed_cause_comes_first_among_the_undetermined() -> None:
    silent = replace(DISPUTED, name="A first by name", causes=())
    rows = rank([silent, DISPUTED], default_rules())
    assert [row.candidate.name for row in rows] == ["Gravel-2", "A first by name"]


def test_trivial_with_everything_ranks_below_nontrivial_with_nothing() -> None:
    best = replace(
        SOUND, class_="trivial", title="Trivial", indices="0;(000)", grade="A",
        gaps=Gaps("insulator", 2.0, 2.0, 2.0), tipping_mev=1e3, exposure_mev=1e3, elements=("Bi",),
    )  # fmt: skip
    least = replace(
        SOUND, grade="C", agreement="one-witness", gaps=Gaps("unresolved", None, None, None),
        elements=None,
    )  # fmt: skip
    rows = rank([best, least], default_rules())
    assert [row.candidate.class_ for row in rows] == ["strong-ti", "trivial"]
    assert (rows[0].merit or 0.0) < (rows[1].merit or 0.0)


def test_every_part_with_a_weight_has_its_reason() -> None:
    (row,) = rank([SOUND], default_rules())
    assert len(row.reasons) == 1 + len(row.parts)
    assert row.merit == sum(part.points for part in row.parts)
    assert any("Indirect gap 200 meV (sampled, not proved)" in reason for reason in row.reasons)
    weights = {**default_rules().weights, "handling": 0.0}
    (without,) = rank([SOUND], MeritRules({**default_rules().tables, "weights": weights}, "x"))
    assert not any("caution" in reason for reason in without.reasons)


def test_cases_equal_in_all_else_are_ordered_by_name_then_folder() -> None:
    twins = [replace(SOUND, name=n, folder=f) for n, f in (("b", "1"), ("a", "3"), ("a", "2"))]
    found = [(r.candidate.name, r.candidate.folder) for r in rank(twins, default_rules())]
    assert found == [("a", "2"), ("a", "3"), ("b", "1")]


def test_equal_merits_are_ordered_by_gap() -> None:
    wide = [
        replace(SOUND, name=str(gap), gaps=Gaps("insulator", gap, None, gap))
        for gap in (0.5, 2.0, 1.0)
    ]
    rows = rank(wide, default_rules())
    assert len({row.merit for row in rows}) == 1
    assert [row.candidate.name for row in rows] == ["2.0", "1.0", "0.5"]


def test_points_in_words() -> None:
    assert [points(v) for v in (0.0, 0.01, 7.0, 12.34)] == ["0", "0.0100", "7", "12.3"]
