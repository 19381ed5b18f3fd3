"""Whether a verdict is in doubt, and which experiments could settle it."""

from __future__ import annotations

from collections.abc import Sequence

from topovet.verdict.conclude import weigh_witnesses
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag

WORTH_TRYING: dict[str, frozenset[str]] = {
    "declaration": frozenset({"orbital-declaration-wrong"}),
    "centre": frozenset({"inversion-centre-shifted"}),
    "filling": frozenset(
        {"filling-off", "fermi-outside-gap", "gap-closes", "witnesses-disagree", "parity-impure"}
    ),
    "symmetrised": frozenset(
        {"symmetry-broken", "time-reversal-broken", "witnesses-disagree", "parity-impure"}
    ),
    "shorter-range": frozenset(
        {"range-truncated", "inside-error-bar", "interpolation-poor", "witnesses-disagree"}
    ),
    "bare": frozenset({"centres-off", "interpolation-poor", "symmetry-broken"}),
    "closer-look": frozenset({"wilson-unresolved", "witnesses-disagree", "gap-closes"}),
}
"""Flags for which each way of reading the case anew is tried."""

_DAMAGE = frozenset({"cell-mismatch", "duplicate-r", "range-truncated", "spin-order-mismatch"})
_MISDECLARED = _DAMAGE | {"orbital-declaration-wrong", "inversion-centre-shifted"}

IN_VAIN: dict[str, frozenset[str]] = {
    "declaration": _DAMAGE,
    "centre": _DAMAGE,
    "filling": _DAMAGE,
    "symmetrised": _MISDECLARED,
    "shorter-range": _MISDECLARED | {"filling-off", "time-reversal-broken", "not-hermitian"},
    "bare": _MISDECLARED | {"filling-off", "time-reversal-broken", "not-hermitian"},
    "closer-look": _MISDECLARED | {"filling-off", "time-reversal-broken", "not-hermitian"},
}
"""Errors with which a way of reading would be one of nonsense: another cause must be mended first,
and nothing that comes out could be believed."""


def reason_for_doubt(findings: Findings, flags: Sequence[Flag]) -> str:
    """What calls for a diagnosis, one clause; empty where nothing does."""
    if weigh_witnesses(findings).word == "disagree":
        return "the witnesses disagree"
    for severity in ("error", "warning"):
        codes = list(dict.fromkeys(flag.code for flag in flags if flag.severity == severity))
        if codes:
            return f"there are flags of severity {severity}: " + ", ".join(codes)
    named = (("parities", findings.parity), ("Wilson loops", findings.wilson))
    for name, witness in named:
        if witness is not None and witness.status in ("unresolved", "failed"):
            return f"{name} say nothing: {witness.reason.rstrip('.')}"
    return ""


def worth_trying(kind: str, flags: Sequence[Flag]) -> bool:
    """Whether a way of reading the case anew could explain one of its flags."""
    raised = {flag.code for flag in flags if flag.severity != "info"}
    standing = {flag.code for flag in flags if flag.severity == "error"}
    standing |= raised & {"time-reversal-broken"}  # fatal to Z2 as a warning too
    return bool(raised & WORTH_TRYING[kind]) and not standing & IN_VAIN[kind]
