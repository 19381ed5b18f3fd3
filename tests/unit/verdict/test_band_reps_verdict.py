"""Band representations in the cross-examination."""

from __future__ import annotations

from dataclasses import replace

import pytest

import invented_band_reps as band_reps
from invented_findings import SOUND, changed
from topovet.invariants.lower_groups import LowerGroup, LowerGroups
from topovet.verdict import judge
from topovet.verdict.agreement import Statement, weigh
from topovet.verdict.band_reps import band_representations_entry
from topovet.verdict.conclude import witness_statements
from topovet.verdict.crystalline import class_without_z2
from topovet.verdict.findings import Findings
from topovet.verdict.raised import raise_flags

STRONG = band_reps.STRONG


def test_eigenvalues_counted_twice_are_one_voice() -> None:
    strong = (1, 0, 0, 0)
    voices = [Statement("parity", strong), Statement("levels", strong, independent=False)]
    assert weigh(voices).word == "one-witness"
    other = Statement("levels", (0, None, None, None), independent=False)
    assert weigh([voices[0], other]).word == "disagree"


def test_a_statement_beside_parities_is_not_independent_and_can_contradict() -> None:
    (parity, levels) = witness_statements(changed(band_reps=STRONG))
    assert (parity.independent, levels.independent) == (True, False)
    assert levels.z2 == (1, 0, 0, 0)
    wrong = replace(band_reps.STRONG_SET, z2=(0, None, None, None))
    codes = [f.code for f in raise_flags(changed(band_reps=band_reps.of(wrong)))]
    assert "witnesses-disagree" in codes


def test_without_parities_it_speaks_for_itself() -> None:
    (levels,) = witness_statements(changed(band_reps=STRONG, parity=None))
    assert (levels.witness, levels.independent) == ("band representations", True)


@pytest.mark.parametrize("bands", [band_reps.CROSSING_SET, band_reps.UNREAD_SET])
def test_levels_that_are_not_those_of_gapped_bands_say_nothing_of_z2(
    bands: band_reps.BandSet,
) -> None:
    statements = witness_statements(changed(band_reps=band_reps.of(bands)))
    assert [s.witness for s in statements] == ["parity"]


def test_where_the_gap_closes_nothing_is_stated() -> None:
    findings = changed(band_reps=STRONG, gap={"status": "gapless"})
    assert "band representations" not in [s.witness for s in witness_statements(findings)]


def test_levels_that_cannot_be_connected_contradict_a_sampled_gap() -> None:
    flags = raise_flags(changed(band_reps=band_reps.of(band_reps.CROSSING_SET)))
    (flag,) = [f for f in flags if f.code == "gap-closes"]
    assert flag.severity == "error"
    assert "cannot be connected" in flag.summary
    assert not [f for f in raise_flags(changed(band_reps=STRONG)) if f.code == "gap-closes"]


def test_entry_of_the_document() -> None:
    entry = band_representations_entry(changed(band_reps=band_reps.of(band_reps.OBSTRUCTED_SET)))
    assert (entry.status, entry.classification, entry.obstructed) == (
        "ok",
        "sum of atomic limits",
        True,
    )
    assert entry.multiplicities[0]["levels"] == {"Γ1ab+": 2, "Γ2−": 1}
    assert entry.atomic_limits[0]["on_atoms"] is False
    assert entry.lines[1]["levels"] == {"1a": 4, "1b": 2}
    assert [s["bands"] for s in entry.isolated_sets] == [4, 2]
    nothing = replace(SOUND, missing={"band-representations": "the gap is not known"})
    entry = band_representations_entry(nothing)
    assert (entry.status, entry.reason) == ("not-applicable", "the gap is not known")


def test_levels_up_to_a_lower_gap_and_which_gaps_are_proved() -> None:
    up_to_4 = replace(band_reps.OBSTRUCTED_SET, first_band=0, n_bands=4)
    lower = LowerGroup(4, 0.5, (0.0, 0.0, 0.0), 0.4, "ok", "", None, None, None, None, 9)
    findings = changed(
        band_reps=replace(STRONG, below=(up_to_4,)),
        lower=LowerGroups((lower,), 0, ()),
        electrons={"filling": 6},
        gap_proof=None,
    )

    def gaps_proved(findings: Findings) -> list[bool]:
        sets = band_representations_entry(findings).isolated_sets
        return [entry["gaps_proved"] for entry in sets]

    (entry,) = judge._lower_gaps(findings) or ()
    assert (entry.classification, entry.obstructed) == (up_to_4.classification, True)
    assert gaps_proved(findings) == [False, False]
    proved = LowerGroups((replace(lower, proved_min_ev=0.4),), 0, ())
    assert gaps_proved(replace(findings, lower=proved)) == [True, False]


def _class(bands: band_reps.BandSet) -> tuple[str, str]:
    findings = changed(parity=None, band_reps=band_reps.of(bands))
    class_, grounds = class_without_z2(findings, {})
    return class_, "; ".join(grounds)


def test_levels_of_no_atomic_limit_are_not_called_trivial() -> None:
    """Also where no named formula shows them."""
    class_, grounds = _class(replace(band_reps.STRONG_SET, z2=(0, 0, 0, 0)))
    assert class_ == "higher-order"
    assert "no sum or difference of atomic limits" in grounds


def test_in_a_layer_they_are_those_of_a_mirror_chern_number() -> None:
    """X_BS of all layer groups is Z2 or a mirror Chern number modulo n (Po et al. 2017)."""
    bands = replace(band_reps.STRONG_SET, z2=(0,), indicator=(2,))
    layer = replace(band_reps.of(bands), dimension=2)
    class_, grounds = class_without_z2(changed(parity=None, band_reps=layer), {})
    assert class_ == "crystalline-ti"
    assert "mirror Chern number other than 0" in grounds[0]


def test_trivial_is_said_with_what_the_levels_add() -> None:
    assert "obstructed atomic limit" in _class(band_reps.OBSTRUCTED_SET)[1]
    assert "fragile" in _class(band_reps.FRAGILE_SET)[1]
    class_, grounds = _class(band_reps.ATOMIC_SET)
    assert class_ == "trivial"
    assert "levels" not in grounds
