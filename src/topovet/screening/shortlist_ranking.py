"""The order of a shortlist: tiers that no weight crosses, merit within them, reasons in words."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

from topovet.notation import one_line, significant
from topovet.report.shortlist.records import TIERS, Candidate, Part, Ranked
from topovet.screening.merit import limiting_gap, merit_parts
from topovet.screening.merit_rules import MeritRules

_TIER_WORDS = {
    "nontrivial": "Nontrivial by a verdict that stands: above every trivial, metallic and "
    "undetermined case.",
    "trivial": "Every index that was computed is zero: below every nontrivial case.",
    "metal": "No direct gap separates the filled bands: below every case with a gap.",
    "undetermined": "Undetermined: below every case with a verdict, and without a merit.",
}

_DIGITS = 9
"""Merits that agree to so many decimals are equal: sums of the same points in another order."""


def tier_of(candidate: Candidate) -> str:
    """The tier of a case; one whose verdict is not stood behind is undetermined."""
    if candidate.obstacle:
        return "undetermined"
    return candidate.class_ if candidate.class_ in ("trivial", "metal") else "nontrivial"


def rank(candidates: Iterable[Candidate], rules: MeritRules) -> tuple[Ranked, ...]:
    """All candidates in their order: tier, merit, grade, limiting gap, name, folder.

    Undetermined cases have no merit; among them those come first whose diagnosis confirmed a
    cause, then those with the larger gap.
    """
    placed = sorted((_placed(c, rules) for c in candidates), key=_order)
    return tuple(
        Ranked(i, row.tier, row.merit, row.parts, row.reasons, row.candidate)
        for i, row in enumerate(placed, start=1)
    )


def _placed(candidate: Candidate, rules: MeritRules) -> Ranked:
    tier = tier_of(candidate)
    if tier == "undetermined":
        return Ranked(0, tier, None, (), _open_reasons(candidate), candidate)
    parts = merit_parts(candidate, rules)
    merit = sum(part.points for part in parts)
    return Ranked(0, tier, merit, parts, _reasons(tier, parts), candidate)


def _order(row: Ranked) -> tuple[int, float, float, str, float, str, str]:
    candidate, gap = row.candidate, limiting_gap(row.candidate)
    confirmed = max((c.weight for c in candidate.causes if c.answer == "yes"), default=0.0)
    return (
        TIERS.index(row.tier),
        -round(row.merit or 0.0, _DIGITS),
        -confirmed if row.tier == "undetermined" else 0.0,
        candidate.grade,
        math.inf if gap is None else -gap[0],
        candidate.name,
        candidate.folder,
    )


def _reasons(tier: str, parts: Sequence[Part]) -> tuple[str, ...]:
    return (
        _TIER_WORDS[tier],
        *(
            f"{part.words[:1].upper()}{part.words[1:]}: {points(part.points)} of "
            f"{points(part.weight)} points."
            for part in parts
            if part.weight > 0
        ),
    )


def _open_reasons(candidate: Candidate) -> tuple[str, ...]:
    found = [
        f"Confirmed cause: {one_line(cause.cause).replace('-', ' ')}; "
        f"{one_line(cause.finding).rstrip('.')}."
        for cause in candidate.causes
        if cause.answer == "yes"
    ]
    return (_TIER_WORDS["undetermined"], candidate.obstacle, *found)


def points(value: float) -> str:
    """Points with one decimal, whole numbers without."""
    return significant(value) if 0 < value < 0.05 else f"{value:.1f}".removesuffix(".0")
