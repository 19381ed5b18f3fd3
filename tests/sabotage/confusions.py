"""Where a consequence is named before its cause, and which witness would tell them apart.

Nothing here excuses a wrong verdict: that fails in any case. Each entry is a debt.
"""

from __future__ import annotations

from dataclasses import dataclass

from fault import Fault


@dataclass(frozen=True, slots=True)
class Confusion:
    """A known wrong cause on top.

    Attributes
    ----------
    fault
        Name of the fault.
    named
        Flags that are raised first instead.
    missing
        What is needed to do better.
    """

    fault: str
    named: frozenset[str]
    missing: str


NEEDS_READINGS = (
    "needs other readings of the declaration (order, parity, home cell) tried on the Hamiltonian"
)
NEEDS_COUNT = "needs a flag for projections that do not add up to num_wann"
NEEDS_CENTRES = "needs Wannier centres for distances where no sites are declared"
NEEDS_ORIGIN = "needs the common shift of all centres against their sites told apart from a branch"
NEEDS_FILLINGS = "needs gaps and indices at N±1, N±2"

BROKEN = frozenset({"symmetry-broken"})
MISJUDGED_RANGE = frozenset({"range-truncated", "inside-error-bar"})

CONFUSIONS = (
    Confusion("home-cells-moved", BROKEN, NEEDS_READINGS),
    Confusion("projection-lines-swapped", BROKEN, NEEDS_READINGS),
    Confusion("functions-exchanged", BROKEN, NEEDS_READINGS),
    Confusion("parity-of-orbitals-wrong", BROKEN, NEEDS_READINGS),
    Confusion("projection-line-lost", MISJUDGED_RANGE, NEEDS_COUNT),
    Confusion("projections-absent", MISJUDGED_RANGE, NEEDS_CENTRES),
    Confusion("structure-on-another-origin", frozenset({"centres-off"}), NEEDS_ORIGIN),
    Confusion("filling-misstated-alone", frozenset({"gap-closes"}), NEEDS_FILLINGS),
)


def known_confusion(fault: Fault, named: str) -> str | None:
    """What is missing to name the cause; None where a confusion is not known."""
    for confusion in CONFUSIONS:
        if confusion.fault == fault.name and named in confusion.named:
            return confusion.missing
    return None
