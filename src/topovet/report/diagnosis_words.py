"""The diagnosis in words for people."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from topovet.notation import ev, mev, z2_text
from topovet.verdict.document import CauseEntry, Verdict

NAMES = {
    "spin-order-mismatch": "Spin order of the file",
    "orbital-declaration-wrong": "Declared orbitals",
    "inversion-centre-shifted": "Inversion centre",
    "cell-mismatch": "Cell or structure of another case",
    "filling-off": "Number of electrons",
    "fermi-outside-gap": "Fermi energy",
    "symmetry-broken": "Broken crystal symmetry",
    "time-reversal-broken": "Broken time reversal",
    "not-hermitian": "Hamiltonian that is not Hermitian",
    "range-truncated": "Range of the hoppings",
    "duplicate-r": "R vectors listed twice",
    "missing-partner-r": "R vectors without partner",
    "centres-off": "Wannier centres",
    "gap-closes": "Closing gap",
    "wilson-unresolved": "Too coarse lines of Wilson loops",
    "no-spin-orbit": "No spin-orbit coupling",
    "interpolation-poor": "Poor interpolation",
    "inside-error-bar": "Errors as large as the gap",
    "noise": "Noise on the Hamiltonian",
}
"""What each cause is about."""

ANSWERS = {"yes": "confirmed", "open": "possible", "no": "ruled out"}

AGREEMENT = {
    "agree": "in agreement",
    "one-witness": "one speaks",
    "disagree": "in disagreement",
    "undetermined": "none speaks",
}


@dataclass(frozen=True, slots=True)
class SortedCauses:
    """Causes that are confirmed or possible, and those that were ruled out."""

    likely: tuple[CauseEntry, ...]
    ruled_out: tuple[CauseEntry, ...]


def sort_causes(causes: Sequence[CauseEntry]) -> SortedCauses:
    """Split by answer, order kept."""
    return SortedCauses(
        tuple(cause for cause in causes if cause.answer != "no"),
        tuple(cause for cause in causes if cause.answer == "no"),
    )


def cause_name(code: str) -> str:
    """A cause by what it is about; its code where there is no other name."""
    return NAMES.get(code, code)


def diagnosis_line(verdict: Verdict) -> str:
    """The most probable cause and what would be were it mended; empty where nothing is in doubt."""
    likely = sort_causes(verdict.diagnosis.causes).likely
    if not likely:
        return ""
    cause = likely[0]
    line = f"{cause_name(cause.cause)} ({ANSWERS[cause.answer]}): {cause.finding}"
    mended = cause.if_mended
    if mended is None:
        return line
    if mended.class_ == "undetermined":
        return f"{line} Mended, it would still be undetermined."
    index = "" if mended.z2 is None else f" {z2_text(mended.z2, plain=True)}"
    gap = "" if mended.gap_eV is None else f", direct gap {_gap(mended.gap_eV)}"
    return f"{line} Mended, it would be {mended.class_}{index}{gap}."


def _gap(gap_ev: float) -> str:
    return ev(gap_ev) if gap_ev >= 0.1 else mev(1000 * gap_ev)
