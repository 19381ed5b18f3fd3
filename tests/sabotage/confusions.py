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
        Causes that are named first instead.
    missing
        What is needed to do better.
    """

    fault: str
    named: frozenset[str]
    missing: str


CONFUSIONS: tuple[Confusion, ...] = ()
"""None are known: MATRIX.md lists every trial in which another cause was named first."""


def known_confusion(fault: Fault, named: str) -> str | None:
    """What is missing to name the cause; None where a confusion is not known."""
    for confusion in CONFUSIONS:
        if confusion.fault == fault.name and named in confusion.named:
            return confusion.missing
    return None
