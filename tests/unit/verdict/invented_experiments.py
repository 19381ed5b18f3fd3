"""Made-up experiments on the made-up sound case, for tests of the diagnosis."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from invented_findings import SOUND
from topovet.diagnosis.results import Experiments, NoiseTest, Rereading
from topovet.invariants.results import WilsonWitness
from topovet.verdict.diagnose import diagnose
from topovet.verdict.document import CauseEntry, DiagnosisEntry
from topovet.verdict.findings import Findings
from topovet.verdict.inquiry import Inquiry
from topovet.verdict.raised import raise_flags


def wilson(z2: tuple[int, ...] | None, status: str = "ok") -> WilsonWitness:
    reason = "" if status == "ok" else "the budget ended"
    return WilsonWitness(status, reason, z2, (), (), (), 100)


def reading(kind: str, **changes: Any) -> Rereading:
    """The sound case read in another way: parities and Wilson loops give 1;(000)."""
    assert SOUND.gap is not None
    assert SOUND.parity is not None
    sound = Rereading(
        kind=kind,
        change="read in another way",
        filling=6,
        moved_mev=None,
        gap=SOUND.gap,
        typical_gap_ev=2.0,
        time_reversal=SOUND.time_reversal,
        inversion=SOUND.inversion,
        parity=SOUND.parity,
        wilson=wilson(SOUND.parity.z2),
    )
    parts = {
        name: replace(getattr(sound, name), **value) if isinstance(value, dict) else value
        for name, value in changes.items()
    }
    return replace(sound, **parts)


def diagnosis(
    findings: Findings,
    *readings: Rereading,
    noise: tuple[NoiseTest, ...] = (),
    typical_gap_ev: float = 2.0,
) -> DiagnosisEntry:
    flags = raise_flags(findings)
    experiments = Experiments("flags were raised", readings, noise, typical_gap_ev)
    return diagnose(Inquiry(findings, flags, experiments))


def causes(entry: DiagnosisEntry) -> dict[str, CauseEntry]:
    """By name, in order of weight."""
    return {cause.cause: cause for cause in entry.causes}


def named(entry: DiagnosisEntry) -> list[str]:
    """Causes that are confirmed or possible, the most probable first."""
    return [cause.cause for cause in entry.causes if cause.answer != "no"]
