"""What a shortlist is made of: candidates with their place and its reasons, failures, the rules."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

TIERS = ("nontrivial", "trivial", "metal", "undetermined")
"""Best first; no weight lifts a case out of its tier."""

SCHEMA = "topovet.shortlist/1"


@dataclass(frozen=True, slots=True)
class FlagNote:
    """A flag as the verdict carries it."""

    code: str
    severity: str
    summary: str
    advice: str


@dataclass(frozen=True, slots=True)
class Cause:
    """One diagnosed cause of an open or doubtful verdict.

    Attributes
    ----------
    cause
        A flag code or a code of the diagnosis.
    answer
        "yes", "no" or "open".
    weight
        0 to 1, the more probable the larger.
    test, finding, advice
        What was tried, what came out, what would mend it; one sentence each.
    if_mended
        What the verdict would be then, in words; empty where that was not found.
    consequence_of
        Another cause that this one follows from; empty where it stands for itself.
    """

    cause: str
    answer: str
    weight: float
    test: str
    finding: str
    advice: str
    if_mended: str
    consequence_of: str = ""


@dataclass(frozen=True, slots=True)
class WitnessWord:
    """What one witness says for itself, whether or not the verdict stands behind it."""

    name: str
    status: str
    says: str


@dataclass(frozen=True, slots=True)
class Gaps:
    """Gaps of a case, eV, None where not computed.

    Attributes
    ----------
    status
        "insulator", "semimetal-direct-gap", "gapless" or "unresolved".
    direct_ev
        Smallest direct gap that was met: an upper bound of the true one.
    proved_ev
        Proved lower bound of the direct gap.
    indirect_ev
        Conduction minimum less valence maximum over the points that were met.
    """

    status: str
    direct_ev: float | None
    proved_ev: float | None
    indirect_ev: float | None


@dataclass(frozen=True, slots=True)
class Candidate:
    """One vetted case, as much of its verdict as a shortlist needs.

    Attributes
    ----------
    folder
        Its dossier, relative to the folder that was searched, with "/" and printable.
    has_report
        Whether report.html lies beside the verdict.
    link
        Percent-encoded path of that folder, relative to the folder that was searched.
    name, formula
        As the case gives them; any text.
    elements
        Chemical symbols in the formula, sorted; None where the formula cannot be read.
    space_group
        (number, symbol), None where unknown.
    title
        The class in words, for the dimension and the gap.
    indices
        What the verdict stands behind, e.g. "1;(000)", "C = 1" or "0;(000), |C_m| = 2" (mirror
        Chern number); empty where nothing.
    radius_mev
        Robustness radius, meV, half of the direct gap.
    error_mev
        Sum of the known errors of the input, meV.
    tipping_mev
        Distance to the nearest tipping point, meV; None where none is known.
    exposure_mev
        Distance of the Dirac point from the nearest bulk band edge, meV, negative where it is
        buried; None where not computed.
    obstacle
        Why the verdict is not stood behind, one sentence; empty where it is.
    asked_because
        Why a diagnosis was asked for; may be empty.
    """

    folder: str
    link: str
    has_report: bool
    name: str
    formula: str
    elements: tuple[str, ...] | None
    space_group: tuple[int, str] | None
    dimension: int
    class_: str
    title: str
    indices: str
    agreement: str
    grade: str
    gaps: Gaps
    radius_mev: float | None
    error_mev: float | None
    tipping_mev: float | None
    exposure_mev: float | None
    obstacle: str
    flags: tuple[FlagNote, ...]
    witnesses: tuple[WitnessWord, ...]
    asked_because: str
    causes: tuple[Cause, ...]


@dataclass(frozen=True, slots=True)
class Failure:
    """A case without a verdict that can be read.

    Attributes
    ----------
    kind
        "not-vetted" where the run recorded an error, "unreadable" where a dossier is damaged or
        foreign.
    name
        Name of the case, or of its folder.
    folder
        As in `Candidate`.
    message
        One sentence.
    file, line
        Where the fault lies, as far as known; `file` may be empty.
    when
        Time of the failed run as it was recorded; may be empty.
    """

    kind: str
    name: str
    folder: str
    message: str
    file: str
    line: int | None
    when: str


@dataclass(frozen=True, slots=True)
class Part:
    """One part of the merit of a case.

    Attributes
    ----------
    name
        One of `topovet.screening.merit.PARTS`.
    value
        0 to 1; None where nothing was measured, which counts as 0 and is said.
    points, weight
        Points earned and points to be had.
    words
        What the value rests on.
    """

    name: str
    value: float | None
    points: float
    weight: float
    words: str


@dataclass(frozen=True, slots=True)
class Ranked:
    """A candidate in its place.

    Attributes
    ----------
    rank
        From 1, over all candidates, before any filter.
    tier
        One of `TIERS`.
    merit
        Sum of the points; None for undetermined cases, which have nothing to be scored.
    parts
        How the points come about; empty for undetermined cases.
    reasons
        Why it stands here, one sentence each.
    """

    rank: int
    tier: str
    merit: float | None
    parts: tuple[Part, ...]
    reasons: tuple[str, ...]
    candidate: Candidate


@dataclass(frozen=True, slots=True)
class RuleTable:
    """The rules of the merit, ready to be shown.

    Attributes
    ----------
    source
        "defaults" or the file they come from.
    weights
        Part of the merit -> points.
    explained
        (part, how its value comes about), in the order of the weights.
    values
        Every number of the rules by table and key, as in the TOML file.
    """

    source: str
    weights: Mapping[str, float]
    explained: tuple[tuple[str, str], ...]
    values: Mapping[str, Mapping[str, float]]


@dataclass(frozen=True, slots=True)
class Shortlist:
    """The whole list.

    Attributes
    ----------
    rows
        Those that pass the filters, in order of rank.
    failures
        All of them, whatever the filters.
    n_vetted
        Cases with a verdict, before the filters.
    filters
        The filters that were set, as on the command line.
    notes
        What the reader must know of the selection, one sentence each.
    rules
        How the merit was computed.
    version
        Of topovet.
    """

    rows: tuple[Ranked, ...]
    failures: tuple[Failure, ...]
    n_vetted: int
    filters: tuple[str, ...]
    notes: tuple[str, ...]
    rules: RuleTable
    version: str

    def count(self, tier: str) -> int:
        """How many of the rows stand in a tier."""
        return sum(row.tier == tier for row in self.rows)


def plain_parts(row: Ranked) -> list[dict[str, Any]]:
    """The parts of a merit as plain dictionaries."""
    return [
        {"part": p.name, "value": p.value, "points": p.points, "weight": p.weight, "why": p.words}
        for p in row.parts
    ]
