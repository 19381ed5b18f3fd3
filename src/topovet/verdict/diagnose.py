"""The diagnosis: every cause tested, the most probable first, and what the answer would be.

A cause weighs more if its test says yes, if what it explains is flagged as an error, and if the
verdict could be given with it mended. It explains a flag when the flag is gone on the reading in
which the cause is mended; where no such reading can be made, when it stands in `EXPLAINS`. What
another cause explains counts for little, though its own test says yes: it is a consequence.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from topovet.verdict.causes_declared import declared_causes
from topovet.verdict.causes_files import file_causes
from topovet.verdict.causes_physics import physics_causes
from topovet.verdict.document import CauseEntry, DiagnosisEntry, MendedEntry
from topovet.verdict.flags import Flag
from topovet.verdict.inquiry import Cause, Inquiry, verdict_if

SYMPTOMS = frozenset({"parity-impure", "witnesses-disagree", "wilson-unresolved"})
"""Flags that have no test of their own: something else stands behind them."""

_BROKEN = frozenset({"symmetry-broken", "time-reversal-broken"})
_READ_WRONG = (
    _BROKEN
    | SYMPTOMS
    | {"gap-closes", "inside-error-bar", "interpolation-poor", "filling-off", "fermi-outside-gap"}
)

EXPLAINS: dict[str, frozenset[str]] = {
    "not-hermitian": _READ_WRONG,
    "duplicate-r": _READ_WRONG,
    "missing-partner-r": _READ_WRONG,
    "cell-mismatch": _BROKEN
    | SYMPTOMS
    | {
        "orbital-declaration-wrong",
        "inversion-centre-shifted",
        "centres-off",
        "range-truncated",
        "inside-error-bar",
        "interpolation-poor",
    },
    "range-truncated": _READ_WRONG,
    "spin-order-mismatch": _READ_WRONG | {"orbital-declaration-wrong", "no-spin-orbit"},
    "no-spin-orbit": SYMPTOMS | {"gap-closes", "inside-error-bar", "fermi-outside-gap"},
    "centres-off": _READ_WRONG,
    "orbital-declaration-wrong": _BROKEN | SYMPTOMS | {"inside-error-bar"},
    "inversion-centre-shifted": _BROKEN
    | SYMPTOMS
    | {"orbital-declaration-wrong", "inside-error-bar"},
    "filling-off": SYMPTOMS
    | {"gap-closes", "fermi-outside-gap", "inside-error-bar", "interpolation-poor"},
    "inside-error-bar": frozenset(),  # too few digits: what their numbers allow
    "noise": _READ_WRONG,
    "time-reversal-broken": SYMPTOMS | {"symmetry-broken", "inside-error-bar"},
    "symmetry-broken": SYMPTOMS | {"inside-error-bar"},
    "gap-closes": SYMPTOMS | {"fermi-outside-gap", "inside-error-bar"},
    "interpolation-poor": SYMPTOMS | {"inside-error-bar", "range-truncated"},
    "wilson-unresolved": SYMPTOMS,
}
"""What each cause can bring about, upstream first; the order breaks ties."""

ANSWERS = {"yes": 0.45, "open": 0.2, "no": 0.0}
FLAGGED, MENDS, UPSTREAM, CONSEQUENCE = 0.3, 0.2, 0.05, 0.3
"""Weight for a cause, or what it explains, being an error; for a verdict if mended; for coming
early; and the factor for what another cause explains."""


def diagnose(inquiry: Inquiry) -> DiagnosisEntry:
    """All causes, the most probable first.

    Parameters
    ----------
    inquiry
        The case with its flags and experiments.
    """
    causes = [*file_causes(inquiry), *declared_causes(inquiry), *physics_causes(inquiry)]
    tested = [_tested(cause, inquiry) for cause in causes]
    tested.sort(key=lambda item: _rank(item.cause))
    entries = [_entry(item, tested, inquiry.flags) for item in tested]
    entries.sort(key=lambda entry: -entry.weight)
    return DiagnosisEntry(inquiry.experiments.asked_because, tuple(entries))


@dataclass(frozen=True, slots=True)
class _Tested:
    cause: Cause
    mended: MendedEntry | None
    explained: frozenset[str]


def _tested(cause: Cause, inquiry: Inquiry) -> _Tested:
    flagged = frozenset(flag.code for flag in inquiry.flags if flag.severity != "info")
    can_explain = EXPLAINS.get(cause.cause, frozenset())
    may_explain = (can_explain if cause.explains is None else cause.explains) & flagged
    if cause.reading is None or cause.answer == "no":
        return _Tested(cause, None, may_explain if cause.answer == "yes" else frozenset())
    mended, still = verdict_if(inquiry.findings, cause.reading)
    explained = may_explain - still if cause.answer == "yes" else frozenset()
    return _Tested(cause, mended, explained)


def _entry(item: _Tested, all_tested: Sequence[_Tested], flags: Sequence[Flag]) -> CauseEntry:
    cause = item.cause
    upstream = _explained_by(item, all_tested)
    weight = _weight(item, flags) * (CONSEQUENCE if upstream else 1.0)
    return CauseEntry(
        cause=cause.cause,
        answer=cause.answer,
        weight=round(weight, 3),
        test=cause.test,
        finding=cause.finding,
        evidence=dict(cause.evidence),
        advice=cause.advice if cause.answer != "no" else "",
        if_mended=None if cause.far else item.mended,
        consequence_of=upstream,
    )


def _weight(item: _Tested, flags: Sequence[Flag]) -> float:
    weight = ANSWERS[item.cause.answer]
    if item.cause.answer == "no":
        return weight
    errors = {flag.code for flag in flags if flag.severity == "error"}
    if errors & ({item.cause.cause} | item.explained):
        weight += FLAGGED
    if item.mended is not None and item.mended.class_ != "undetermined":
        weight += MENDS
    return weight + UPSTREAM * (1 - _rank(item.cause) / len(EXPLAINS))


def _explained_by(item: _Tested, all_tested: Sequence[_Tested]) -> str:
    """The first cause that explains this one; "" where there is none.

    Of two that explain each other the one that stands first in `EXPLAINS` is upstream.
    """
    if item.cause.answer == "no":
        return ""
    upstream = [
        other.cause
        for other in all_tested
        if item.cause.cause in other.explained
        and (other.cause.cause not in item.explained or _rank(other.cause) < _rank(item.cause))
    ]
    return min(upstream, key=_rank).cause if upstream else ""


def _rank(cause: Cause) -> int:
    """Place in `EXPLAINS`; last for what can explain nothing, such as a sum of errors."""
    order = list(EXPLAINS)
    if cause.cause not in order or cause.explains == frozenset():
        return len(order)
    return order.index(cause.cause)
