"""All faults of the sabotage suite; one entry for each way to spoil a case."""

from __future__ import annotations

from clean_cases import CLEAN_CASES, CleanCase
from fault import Fault
from faults_of_declarations import DECLARATION_FAULTS
from faults_of_files import FILE_FAULTS
from faults_of_physics import PHYSICS_FAULTS

FAULTS: tuple[Fault, ...] = (*FILE_FAULTS, *DECLARATION_FAULTS, *PHYSICS_FAULTS)


def trials() -> list[tuple[CleanCase, Fault, float]]:
    """Every (case, fault, size) of the suite, case by case."""
    return [
        (case, fault, size)
        for case in CLEAN_CASES.values()
        for fault in FAULTS
        for size in fault.sizes_for(case)
    ]
