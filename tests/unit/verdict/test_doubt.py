"""When a diagnosis is called for, and which experiments then. All cases invented."""

from __future__ import annotations

from dataclasses import replace

import pytest
from invented_experiments import wilson

from invented_findings import SOUND, changed
from topovet.diagnosis.results import KINDS
from topovet.verdict.doubt import IN_VAIN, WORTH_TRYING, reason_for_doubt, worth_trying
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.raised import raise_flags


def reason(findings: Findings) -> str:
    return reason_for_doubt(findings, raise_flags(findings))


def test_sound_case_is_not_in_doubt() -> None:
    assert reason(SOUND) == ""
    assert reason(replace(SOUND, wilson=wilson((1, 0, 0, 0)))) == ""


def test_reasons_for_doubt() -> None:
    assert reason(replace(SOUND, wilson=wilson((0, 0, 0, 0)))) == "the witnesses disagree"
    errors = reason(changed(electrons={"filling": 5}, decay={"rim_mev": 80.0}))
    assert errors == "there are flags of severity error: filling-off"
    warnings = reason(changed(decay={"rim_mev": 80.0}))
    assert warnings == "there are flags of severity warning: range-truncated"


def test_an_info_is_no_doubt() -> None:
    assert reason(changed(time_reversal={"violation_mev": 4.0})) == ""


def test_silent_witness_is_a_doubt_even_without_a_flag() -> None:
    assert reason_for_doubt(replace(SOUND, wilson=wilson(None, "unresolved")), ()) == (
        "Wilson loops say nothing: the budget ended"
    )


def flag(code: str, severity: str = "error") -> Flag:
    return Flag(code, severity, "It is.")


def test_each_kind_of_reading_is_called_for_by_something() -> None:
    assert set(WORTH_TRYING) == set(IN_VAIN) == set(KINDS)
    for kind, codes in WORTH_TRYING.items():
        for code in codes:
            assert worth_trying(kind, [flag(code, "warning")]) or code in IN_VAIN[kind]
        assert not worth_trying(kind, [])
        assert not worth_trying(kind, [flag(code, "info") for code in codes])


@pytest.mark.parametrize("damage", ["duplicate-r", "spin-order-mismatch", "range-truncated"])
def test_nothing_is_tried_on_a_damaged_file(damage: str) -> None:
    flags = [flag(damage), flag("gap-closes"), flag("symmetry-broken")]
    assert not any(worth_trying(kind, flags) for kind in KINDS)


def test_mild_damage_hinders_nothing() -> None:
    flags = [flag("duplicate-r", "warning"), flag("gap-closes")]
    assert worth_trying("filling", flags)


def test_no_average_over_operators_that_are_wrong() -> None:
    flags = [flag("orbital-declaration-wrong"), flag("symmetry-broken")]
    assert worth_trying("declaration", flags)
    assert not worth_trying("symmetrised", flags)


def test_without_time_reversal_no_loops_are_looked_at_more_closely() -> None:
    flags = [flag("time-reversal-broken", "warning"), flag("gap-closes")]
    assert not worth_trying("closer-look", flags)
    assert worth_trying("symmetrised", flags)
