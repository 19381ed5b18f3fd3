"""The surface among the witnesses."""

from __future__ import annotations

from dataclasses import replace

import pytest

import invented_surfaces as surfaces
from invented_findings import SOUND, changed
from topovet.invariants.results import ChernWitness
from topovet.verdict.conclude import conclude, witness_statements
from topovet.verdict.judge import judge
from topovet.verdict.raised import raise_flags


def _verdict(findings):
    return judge(findings, inputs=(), settings={}, task_seconds={})


def test_a_surface_is_a_second_voice() -> None:
    findings = changed(surface=surfaces.witness((1, None, 0, None)))
    verdict = _verdict(findings)
    assert verdict.agreement == "agree"
    assert verdict.class_ == "strong-ti"
    surface = verdict.witnesses.surface
    assert (surface.status, surface.z2_strong, surface.z2_partial) == ("ok", 1, (1, None, 0, None))
    assert [entry["parity"] for entry in surface.crossings] == [1, 0]
    assert surface.miller == (0, 0, 1)


def test_it_has_no_opinion_on_indices_it_does_not_settle() -> None:
    findings = changed(surface=surfaces.witness((1, None, 0, None)))
    said = {s.witness: s.z2 for s in witness_statements(findings)}
    assert said["surface states"] == (1, None, 0, None)


@pytest.mark.parametrize("z2", [(0, None, None, None), (1, None, 1, None)])
def test_a_surface_that_contradicts_leaves_nothing(z2) -> None:
    findings = changed(surface=surfaces.witness(z2))
    verdict = _verdict(findings)
    assert (verdict.agreement, verdict.class_) == ("disagree", "undetermined")
    assert verdict.invariants.z2 is None
    flag = next(f for f in verdict.flags if f.code == "witnesses-disagree")
    assert "surface states" in flag.summary


@pytest.mark.parametrize("status", ["not-applicable", "unresolved"])
def test_a_silent_surface_changes_nothing(status: str) -> None:
    silent = surfaces.witness(None, status=status)
    verdict = _verdict(changed(surface=silent))
    assert verdict.agreement == _verdict(SOUND).agreement == "one-witness"
    assert verdict.class_ == "strong-ti"
    assert verdict.witnesses.surface.reason == silent.reason


def test_a_surface_at_odds_with_itself_is_a_warning() -> None:
    verdict = _verdict(changed(surface=surfaces.witness(None, status="failed")))
    flag = next(f for f in verdict.flags if f.code == "witnesses-disagree")
    assert flag.severity == "warning"
    assert verdict.confidence.grade == "C"


def test_no_surface_gives_the_reason_of_the_task() -> None:
    findings = replace(SOUND, missing={"surface": "left out at --effort quick"})
    entry = _verdict(findings).witnesses.surface
    assert (entry.status, entry.reason) == ("not-applicable", "left out at --effort quick")


def _broken(edge: int | None):
    counted = ChernWitness("ok", "", (1,), (((0.0, 1),),), (), 0)
    surface = None if edge is None else surfaces.witness(None, status="ok", reason="", chern=edge)
    return changed(time_reversal={"present": False}, parity=None, chern=counted, surface=surface)


def test_edge_levels_confirm_a_chern_number() -> None:
    assert conclude(_broken(None), ()).agreement == "one-witness"
    confirmed = conclude(_broken(1), ())
    assert (confirmed.agreement, confirmed.invariants.chern) == ("agree", 1)


def test_edge_levels_that_count_otherwise_are_an_error() -> None:
    flags = raise_flags(_broken(-1))
    assert ("witnesses-disagree", "error") in {(f.code, f.severity) for f in flags}
    assert not any(f.code == "witnesses-disagree" for f in raise_flags(_broken(1)))
