"""What each class of a verdict is called, and what it means for a crystal."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.verdict.document import Verdict


@dataclass(frozen=True, slots=True)
class ClassWords:
    """A class in words: heading, noun phrase for a sentence, and what it means."""

    title: str
    noun: str
    meaning: str


_CLASSES = {
    "strong-ti": ClassWords(
        "Strong topological insulator",
        "a strong topological insulator",
        "As long as time reversal holds and the bulk gap stays open, every surface carries "
        "conducting states with an odd number of Dirac cones.",
    ),
    "weak-ti": ClassWords(
        "Weak topological insulator",
        "a weak topological insulator",
        "The strong index is zero but a weak one is not: like a stack of two-dimensional "
        "topological layers, it conducts on side surfaces while the stacking stays regular.",
    ),
    "crystalline-ti": ClassWords(
        "Topological crystalline insulator",
        "a topological crystalline insulator",
        "The time-reversal indices are zero; symmetries of the crystal protect conducting states "
        "on those surfaces that keep them.",
    ),
    "higher-order": ClassWords(
        "Higher-order topological insulator",
        "a higher-order topological insulator",
        "The time-reversal indices are zero but an indicator is not, and no mirror was found to "
        "protect surface states: conducting channels then run along hinges of a crystal whose "
        "shape keeps the protecting symmetry, unless an invariant listed as not tested keeps "
        "surfaces conducting.",
    ),
    "chern": ClassWords(
        "Chern insulator",
        "a Chern insulator",
        "Time reversal is broken and a Chern number is not zero: edges or side surfaces conduct "
        "in one direction.",
    ),
    "axion-candidate": ClassWords(
        "Axion-insulator candidate",
        "a candidate for an axion insulator",
        "Inversion indicators allow a quantised magnetoelectric response; the Chern numbers must "
        "vanish for it, which the indicators alone do not show.",
    ),
    "trivial": ClassWords(
        "Trivial",
        "trivial by the indices that were computed",
        "All indices that were computed are zero. Kinds of topology that this report lists as "
        "not tested are not excluded.",
    ),
    "weyl-semimetal": ClassWords(
        "Weyl semimetal",
        "a Weyl semimetal",
        "Bands touch at isolated points that carry a chirality; no gapped state has these "
        "indicators.",
    ),
    "dirac-semimetal": ClassWords(
        "Dirac semimetal",
        "a Dirac semimetal",
        "Doubly degenerate bands touch at isolated points that a crystal symmetry protects.",
    ),
    "nodal-line": ClassWords(
        "Nodal-line semimetal", "a nodal-line semimetal", "Bands touch along lines in k-space."
    ),
    "metal": ClassWords(
        "Metal",
        "a metal without a direct gap above the filled bands",
        "No gap separates the filled bands from the rest, so indices of the filled bands do not "
        "exist.",
    ),
    "undetermined": ClassWords(
        "Undetermined",
        "undetermined",
        "The tests that were made do not carry a conclusion. This says nothing about the "
        "material itself.",
    ),
}

_STRONG_2D = ClassWords(
    "Two-dimensional topological insulator",
    "a two-dimensional topological insulator (quantum spin Hall insulator)",
    "As long as time reversal holds and the bulk gap stays open, every edge carries a pair of "
    "counter-propagating conducting channels.",
)


_INDICES_EXIST = (
    "A direct gap separates the filled bands wherever it was sampled, so that their indices exist; "
    "but bands overlap in energy, and the bulk conducts. "
)
_SEMIMETALS = {
    "strong-ti": ClassWords(
        "Semimetal with a strong index",
        "a semimetal whose filled bands carry the strong topological index",
        _INDICES_EXIST + "Boundary states that the index calls for lie beside states of the bulk.",
    ),
    "weak-ti": ClassWords(
        "Semimetal with a weak index",
        "a semimetal whose filled bands carry a weak topological index",
        _INDICES_EXIST + "Boundary states that the index calls for lie beside states of the bulk.",
    ),
    "crystalline-ti": ClassWords(
        "Semimetal with a crystalline index",
        "a semimetal whose filled bands carry a mirror Chern number",
        _INDICES_EXIST + "Boundary states that the index calls for lie beside states of the bulk.",
    ),
    "higher-order": ClassWords(
        "Semimetal with a nontrivial indicator",
        "a semimetal whose filled bands carry a nontrivial symmetry indicator",
        _INDICES_EXIST + "What it calls for at surfaces or hinges lies beside states of the bulk.",
    ),
    "trivial": ClassWords(
        "Trivial semimetal",
        "a semimetal, trivial by the indices that were computed",
        _INDICES_EXIST + _CLASSES["trivial"].meaning,
    ),
}


def class_words(verdict: Verdict) -> ClassWords:
    """Heading, noun phrase and meaning of the verdict's class, for its dimension and gap."""
    return words_of_class(verdict.class_, verdict.gap.status, verdict.case.dimension)


def words_of_class(class_: str, gap_status: str, dimension: int) -> ClassWords:
    """As `class_words`, for a verdict that is known by these three alone."""
    if gap_status == "semimetal-direct-gap" and class_ in _SEMIMETALS:
        return _SEMIMETALS[class_]
    if class_ == "strong-ti" and dimension == 2:
        return _STRONG_2D
    return _CLASSES[class_]
