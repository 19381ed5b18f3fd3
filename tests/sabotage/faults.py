"""All faults of the sabotage suite; one entry for each way to spoil a case."""

from __future__ import annotations

from clean_cases import CLEAN_CASES, CleanCase
from fault import Fault
from faults_of_declarations import DECLARATION_FAULTS
from faults_of_files import FILE_FAULTS
from faults_of_physics import PHYSICS_FAULTS

FAULTS: tuple[Fault, ...] = (*FILE_FAULTS, *DECLARATION_FAULTS, *PHYSICS_FAULTS)


SHORT_MODEL, SHORT_REAL = "kane_mele", "Bi111_bilayer"
"""Cases of the short part that is run every day, see `is_short`."""


def is_short(case: CleanCase, fault: Fault, size: float) -> bool:
    """Whether a trial belongs to the short part.

    At their last size one model in full, of the other models every eleventh fault in turn (every
    third of those that the one model is spared), and one first-principles case where only such a
    case will do.
    """
    sizes = fault.sizes_for(case)
    if case.name == SHORT_MODEL:
        return size == sizes[-1]
    if case.name == SHORT_REAL:
        return fault.only_real and size == sizes[-1]
    turn = FAULTS.index(fault) + list(CLEAN_CASES).index(case.name)
    every = 11 if fault.sizes_for(CLEAN_CASES[SHORT_MODEL]) else 3
    return not case.real and size == sizes[-1] and turn % every == 0


def trials() -> list[tuple[CleanCase, Fault, float]]:
    """Every (case, fault, size) of the suite, case by case."""
    return [
        (case, fault, size)
        for case in CLEAN_CASES.values()
        for fault in FAULTS
        for size in fault.sizes_for(case)
    ]
