"""The confidence grade: the same rules for every case.

A   two independent witnesses agree, the gap is proved, the error budget is below half of the
    robustness radius, and no flag touches the verdict;
B   as A, but with one witness or with a gap that was only sampled;
C   a verdict that stands, with a warning that touches it or an error budget above half of the
    radius;
D   undetermined.
"""

from __future__ import annotations

from collections.abc import Sequence

from topovet.notation import mev
from topovet.verdict.budget import error_budget, robustness_radius, total_error
from topovet.verdict.conclude import Conclusion
from topovet.verdict.document import ConfidenceEntry
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag

BESIDE_THE_VERDICT = frozenset({"fermi-outside-gap", "centres-off", "spin-order-mismatch"})
"""Warnings that do not lower the grade: they concern the sample, or were mended and re-tested."""


def grade(findings: Findings, conclusion: Conclusion, flags: Sequence[Flag]) -> ConfidenceEntry:
    """Grade and its reasons, in words."""
    if conclusion.class_ == "undetermined":
        return ConfidenceEntry("D", conclusion.grounds)
    radius, total = robustness_radius(findings), total_error(error_budget(findings))
    reasons = [
        *conclusion.grounds,
        _voices(conclusion),
        _gap(findings),
    ]
    warnings = [
        flag.code
        for flag in flags
        if flag.severity == "warning" and flag.code not in BESIDE_THE_VERDICT
    ]
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


def _gap(findings: Findings) -> str:
    proved, proof = findings.proved_gap_mev, findings.gap_proof
    if proved is not None:
        return f"the gap is proved to exceed {mev(proved)} at every k"
    if proof is not None and proof.reason:
        return f"the gap is sampled, not proved ({proof.reason})"
    return "the gap is sampled, not proved"


def _voices(conclusion: Conclusion) -> str:
    if conclusion.agreement == "agree":
        return "independent witnesses agree"
    return "one witness speaks"
