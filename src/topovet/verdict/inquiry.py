"""The state of a diagnosis: what was found, what was flagged, what experiments say."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

from topovet.diagnosis.results import Experiments, NoiseTest, Rereading
from topovet.verdict.budget import error_budget, robustness_radius, total_error
from topovet.verdict.conclude import Conclusion, conclude
from topovet.verdict.document import MendedEntry
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.raised import raise_flags


@dataclass(frozen=True, slots=True)
class Cause:
    """One possible cause, tested.

    Attributes
    ----------
    cause
        A flag code, or "noise".
    answer
        "yes", "no" or "open".
    test, finding
        What was tried and what came out, one sentence each.
    evidence
        Numbers by name.
    advice
        What would mend it.
    reading
        The case read as if it were mended; None where that cannot be tried.
    explains
        Flags that it can bring about, where that depends on its numbers; None where it depends on
        the cause alone.
    far
        Whether the reading is too far from the Hamiltonian for its indices to be shown. Which flags
        are gone on it still tells causes from consequences.
    """

    cause: str
    answer: str
    test: str
    finding: str
    evidence: Mapping[str, Any]
    advice: str = ""
    reading: Rereading | None = None
    explains: frozenset[str] | None = None
    far: bool = False


@dataclass(frozen=True, slots=True, eq=False)
class Inquiry:
    """Everything that causes are judged from.

    Attributes
    ----------
    findings, flags, experiments
        Of the case as it was read.
    """

    findings: Findings
    flags: tuple[Flag, ...]
    experiments: Experiments

    def flag(self, *codes: str) -> Flag | None:
        """The most severe flag with one of these codes that is more than an info."""
        return next((f for f in self.flags if f.code in codes and f.severity != "info"), None)

    def reading(self, kind: str) -> Rereading | None:
        """The first reading of a kind."""
        return next(iter(self.experiments.of_kind(kind)), None)

    def noise(self) -> Iterator[NoiseTest]:
        yield from self.experiments.noise

    @property
    def radius_mev(self) -> float | None:
        return robustness_radius(self.findings)

    def errors_mev(self) -> dict[str, float]:
        """The known errors that were measured, the largest first."""
        known = {k: v for k, v in error_budget(self.findings).items() if v is not None}
        return dict(sorted(known.items(), key=lambda item: -item[1]))

    def is_largest_error(self, name: str) -> bool:
        """Whether known errors fill the robustness radius, and this one is the largest of them."""
        errors, radius = self.errors_mev(), self.radius_mev
        fills = radius is not None and total_error(dict(errors)) >= radius
        return fills and next(iter(errors), "") == name


def findings_of(findings: Findings, reading: Rereading) -> Findings:
    """The case as a reading has it: what rests on the old one is left out."""
    electrons, declared, shift_test = findings.electrons, findings.declared, findings.shift_test
    assert electrons is not None
    if reading.kind == "centre":
        declared = replace(declared, settings=replace(declared.settings, inversion_centre=None))
    if reading.kind == "declaration" and shift_test is not None:
        shift_test = replace(shift_test, suspects=(), elsewhere=())
    # built anew, so that a witness that is not asked again is left out, whatever it is
    return Findings(
        declared=declared,
        spinful=findings.spinful,
        audit=findings.audit,
        decay=findings.decay,
        spin_order=findings.spin_order,
        time_reversal=reading.time_reversal,
        inversion=reading.inversion,
        shift_test=shift_test,
        space_group=findings.space_group,
        inferred=findings.inferred,
        symmetry_class=findings.symmetry_class,
        electrons=replace(electrons, filling=reading.filling),
        gap=reading.gap,
        parity=reading.parity,
        wilson=reading.wilson,
        interpolation=None if reading.kind in ("filling", "bare") else findings.interpolation,
        missing=findings.missing,
    )


def verdict_if(findings: Findings, reading: Rereading) -> tuple[MendedEntry, frozenset[str]]:
    """What would be concluded from a reading, and the codes that would still be flagged."""
    mended = findings_of(findings, reading)
    flags = raise_flags(mended)
    conclusion: Conclusion = conclude(mended, flags)
    still = frozenset(flag.code for flag in flags if flag.severity != "info")
    entry = MendedEntry(
        z2=conclusion.invariants.z2,
        z4=conclusion.invariants.z4,
        class_=conclusion.class_,
        agreement=conclusion.agreement,
        gap_eV=reading.gap.direct_ev,
    )
    return entry, still
