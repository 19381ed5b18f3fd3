"""No silent wrong verdict: every clean case spoiled in every way, in sizes from harmless to fatal.

Whatever was done to a case, the verdict keeps the right answer (or, where the Hamiltonian itself
was changed, gives the one of the changed Hamiltonian), or it is undetermined, or a flag of severity
error is raised, or the case is refused with a message. And the first flag names the right cause,
but for the debts listed in `confusions`.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from clean_cases import CLEAN_CASES, CleanCase
from confusions import known_confusion
from examine import examine, top_cause
from fault import Fault
from faults import FAULTS, trials

QUICK = ("kane_mele",)
"""Cases of the default part; all others are marked slow."""


def marks(case: CleanCase) -> list[pytest.MarkDecorator]:
    found = [] if case.name in QUICK else [pytest.mark.slow]
    return [*found, pytest.mark.real_data] if case.real else found


TRIALS = [
    pytest.param(case, fault, size, id=f"{case.name}-{fault.name}-{size:g}", marks=marks(case))
    for case, fault, size in trials()
]


@pytest.mark.parametrize(("case", "fault", "size"), TRIALS)
def test_no_silent_wrong_verdict(case: CleanCase, fault: Fault, size: float) -> None:
    outcome = examine(case, fault, size)
    assert not outcome.wrong
    named = top_cause(case, outcome)
    if named is None or named in fault.expected:
        return
    missing = known_confusion(fault, named)
    if missing is None:
        pytest.fail(f"{named} is named first: {outcome.flags[0].summary}")
    pytest.xfail(missing)


@pytest.mark.parametrize("case", CLEAN_CASES.values(), ids=lambda case: case.name)
def test_clean_case_is_right_and_without_error(case: CleanCase) -> None:
    outcome = examine(case)
    assert (outcome.z2, outcome.class_) == (case.z2, case.class_)
    assert not outcome.wrong
    assert "error" not in {flag.severity for flag in outcome.flags}


@pytest.mark.parametrize("fault", FAULTS, ids=lambda fault: fault.name)
def test_every_size_of_a_fault_changes_the_folder(fault: Fault, tmp_path: Path) -> None:
    """A fault that does nothing would pass every other test."""
    case = next(case for case in reversed(CLEAN_CASES.values()) if fault.sizes_for(case))
    case.lay(tmp_path / "clean")
    before = contents(tmp_path / "clean")
    for i, size in enumerate(fault.sizes_for(case)):
        folder = tmp_path / f"spoiled{i}" / "case"
        case.lay(folder)
        fault.apply(folder, size)
        assert contents(folder) != before


def contents(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def test_names_of_faults_are_unique() -> None:
    assert len({fault.name for fault in FAULTS}) == len(FAULTS)
