"""What follows from a walk, in numbers and in one sentence."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.deformation.results import Closing, Segment, Walk
from topovet.notation import k_text, z2_text

OUTCOMES = ("stays-open", "closes", "gapless-interval", "undetermined")


@dataclass(frozen=True, slots=True)
class Change:
    """An index before and after.

    Attributes
    ----------
    index
        "z2", "z4", "eta4" or "chern".
    before, after
        Its values at A and at B.
    """

    index: str
    before: tuple[int, ...]
    after: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Conclusion:
    """The answer.

    Attributes
    ----------
    outcome
        One of `OUTCOMES`.
    proved
        The open gap is proved for all lambda ("stays-open"), or for all but the resolution beside
        the closings; False where a part was only sampled.
    changes
        Indices that differ between the two ends; None where one of them is open.
    sentence
        The same in words.
    doubts
        What speaks against it, or was not settled.
    """

    outcome: str
    proved: bool
    changes: tuple[Change, ...] | None
    sentence: str
    doubts: tuple[str, ...]


def conclude(walk: Walk, doubts: tuple[str, ...] = ()) -> Conclusion:
    """The conclusion of a walk.

    Parameters
    ----------
    walk
        See `topovet.deformation.walk.walk`.
    doubts
        What is known against either end; then nothing is said of the indices.
    """
    own = _contradictions(walk)
    proved = bool(walk.stretches) and not walk.proof_note
    first, last = _end_segment(walk, 0.0), _end_segment(walk, 1.0)
    changes = None if own or doubts else _changes(first, last)
    outcome = "undetermined" if own else _outcome(walk.closings)
    notes = (*own, *doubts, *_open_sides(walk))
    return Conclusion(outcome, proved, changes, _sentence(walk, outcome, proved, changes), notes)


def _outcome(closings: tuple[Closing, ...]) -> str:
    if not closings:
        return "stays-open"
    return "gapless-interval" if any(c.kind == "interval" for c in closings) else "closes"


def _end_segment(walk: Walk, lam: float) -> Segment | None:
    return next((s for s in walk.segments if lam in (s.lo, s.hi)), None)


def _contradictions(walk: Walk) -> tuple[str, ...]:
    found = []
    for segment in walk.segments:
        where = f"λ = {segment.lo:.4f} to {segment.hi:.4f}"
        if not segment.consistent:
            found.append(
                f"indices differ within {where} although no closing was found there: one was missed"
            )
        found += [
            f"parities and Wilson loops disagree at λ = {side.lam:.4f}"
            for side in segment.sides
            if side.agreement == "disagree"
        ]
    return tuple(found)


def _open_sides(walk: Walk) -> tuple[str, ...]:
    return tuple(
        f"at λ = {side.lam:.4f} {note}"
        for segment in walk.segments
        for side in segment.sides
        for note in side.notes
    )


def _changes(first: Segment | None, last: Segment | None) -> tuple[Change, ...] | None:
    if first is None or last is None or first.indices is None or last.indices is None:
        return None
    before, after = first.sides[0], last.sides[-1]
    pairs = {
        "z2": (before.z2, after.z2),
        "z4": (_single(before.z4), _single(after.z4)),
        "eta4": (_single(before.eta4), _single(after.eta4)),
        "chern": (before.chern, after.chern),
    }
    known = {name: pair for name, pair in pairs.items() if None not in pair}
    if not known:
        return None
    return tuple(
        Change(name, old, new)
        for name, (old, new) in known.items()
        if old is not None and new is not None and old != new
    )


def _single(value: int | None) -> tuple[int, ...] | None:
    return None if value is None else (value,)


def index_text(name: str, value: tuple[int, ...]) -> str:
    """Z₂ = 1;(000), Z₄ = 1, η = 2, C = 1 or C = (0, 0, 1)."""
    if name == "z2":
        return f"Z₂ = {z2_text(value)}"
    plain = str(value[0]) if len(value) == 1 else f"({', '.join(map(str, value))})"
    symbol = {"z4": "Z₄", "eta4": "η", "chern": "C"}[name]
    return f"{symbol} = {plain}"


def side_text(segment: Segment) -> str:
    """Indices that hold over a segment."""
    side = segment.indices
    if side is None:
        return "open"
    values = {
        "z2": side.z2,
        "z4": _single(side.z4),
        "eta4": _single(side.eta4),
        "chern": side.chern,
    }
    said = [index_text(name, value) for name, value in values.items() if value is not None]
    return ", ".join(said) or "no index applies"


def _sentence(walk: Walk, outcome: str, proved: bool, changes: tuple[Change, ...] | None) -> str:
    if outcome == "undetermined":
        return "Undetermined: what was found contradicts itself, see the doubts."
    if outcome == "stays-open":
        how = (
            "is proved to stay open at every k and every λ, shared symmetries made exact"
            if walk.proved_throughout
            else "was met open wherever it was looked at, which is no proof"
        )
        same = "both ends are one phase" if walk.proved_throughout else "no index changes"
        return f"The direct gap {how}: {same}{_known_index(walk)}."
    places = "; ".join(_place(c) for c in walk.closings)
    return f"The direct gap closes {places}. {_change_text(changes)}"


def _known_index(walk: Walk) -> str:
    text = side_text(walk.segments[0]) if walk.segments else "open"
    return "" if text in ("open", "no index applies") else f", {text}"


def _place(closing: Closing) -> str:
    if closing.kind == "interval":
        return f"over the range of λ from {closing.lo:.4f} to {closing.hi:.4f}"
    exchanges = ", ".join(
        f"odd states below it at {k_text(e.k)} go from {e.n_minus_before} to {e.n_minus_after}"
        for e in closing.exchanges
    )
    at = f"at λ = {closing.lam:.4f}, k = {k_text(closing.k)}"
    return f"{at} ({exchanges})" if exchanges else at


def _change_text(changes: tuple[Change, ...] | None) -> str:
    if changes is None:
        return "What changes is open."
    if not changes:
        return "No index that was computed changes."
    parts = [
        f"{index_text(c.index, c.before)} becomes {index_text(c.index, c.after).split('= ')[1]}"
        for c in changes
    ]
    return f"From A to B {', '.join(parts)}."
