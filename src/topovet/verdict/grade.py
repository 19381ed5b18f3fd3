"""The confidence grade: the same rules for every case, shown in the report as they stand here."""

from __future__ import annotations

from collections.abc import Sequence

from topovet.notation import ev, mev
from topovet.verdict.budget import error_budget, robustness_radius, total_error
from topovet.verdict.conclude import Conclusion
from topovet.verdict.document import ConfidenceEntry
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.semimetal import SEMIMETALS, conclude_nodes

RULES = {
    "A": "Two independent witnesses agree; the gap is proved, to at least half of the gap that was "
    "met; known errors sum to less than half of the robustness radius; no warning touches the "
    "verdict.",
    "B": "As A, but one witness speaks alone, or the gap is sampled. Nodes of a semimetal reach B "
    "at most: one invariant holds each, and the gap around them stands for the gap.",
    "C": "The verdict stands, but a warning touches it, or known errors sum to half of the "
    "robustness radius or more.",
    "D": "Undetermined.",
}
"""What each grade means, from the best down."""

BESIDE_THE_VERDICT = frozenset({"fermi-outside-gap", "centres-off", "spin-order-mismatch"})
"""Warnings that do not lower the grade: they concern the sample, or were mended and re-tested."""


def grade(findings: Findings, conclusion: Conclusion, flags: Sequence[Flag]) -> ConfidenceEntry:
    """Grade and its reasons, in words."""
    if conclusion.class_ == "undetermined":
        return ConfidenceEntry("D", conclusion.grounds)
    if conclusion.class_ in SEMIMETALS:
        return _grade_nodes(findings, conclusion, flags)
    radius, total = robustness_radius(findings), total_error(error_budget(findings))
    reasons = [
        *conclusion.grounds,
        _voices(conclusion),
        _gap(findings),
    ]
    warnings = _warnings(flags, BESIDE_THE_VERDICT)
    too_large = radius is None or total >= 0.5 * radius
    if radius is not None:
        relation = "above" if too_large else "below"
        reasons.append(
            f"known errors of {mev(total)} are {relation} half of the robustness radius of "
            f"{mev(radius)}"
        )
    if warnings:
        reasons.append("warnings that touch the verdict: " + ", ".join(dict.fromkeys(warnings)))
    best = conclusion.agreement == "agree" and findings.proved_gap_mev is not None
    letter = "C" if warnings or too_large else "A" if best else "B"
    return ConfidenceEntry(letter, tuple(reasons))


def _grade_nodes(
    findings: Findings, conclusion: Conclusion, flags: Sequence[Flag]
) -> ConfidenceEntry:
    barrier, total = conclude_nodes(findings).barrier_ev, total_error(error_budget(findings))
    reasons = list(conclusion.grounds)
    if barrier is not None:
        reasons.append(
            f"on surfaces around the nodes the gap is at least {mev(1000 * barrier)}, more than "
            f"twice the known errors of {mev(total)}"
        )
    warnings = _warnings(flags, BESIDE_THE_VERDICT | {"gap-closes"})
    if warnings:
        reasons.append("warnings that touch the verdict: " + ", ".join(dict.fromkeys(warnings)))
    return ConfidenceEntry("C" if warnings else "B", tuple(reasons))


def _warnings(flags: Sequence[Flag], beside: frozenset[str]) -> list[str]:
    return [f.code for f in flags if f.severity == "warning" and f.code not in beside]


def _gap(findings: Findings) -> str:
    bound, proof = findings.gap_bound_mev, findings.gap_proof
    if bound is not None and proof is not None:
        proved = f"the gap is proved to exceed {mev(bound)} at every k"
        if findings.proved_gap_mev is None:
            return f"{proved}, too far below the {ev(proof.attained_ev)} attained ({proof.reason})"
        return proved if not proof.reason else f"{proved} ({proof.reason})"
    if proof is not None and proof.reason:
        return f"the gap is sampled, not proved ({proof.reason})"
    return "the gap is sampled, not proved"


def _voices(conclusion: Conclusion) -> str:
    if conclusion.agreement == "agree":
        return "independent witnesses agree"
    return "one witness speaks"
