"""One trial: a clean case spoiled, vetted, and the verdict held against the truth."""

from __future__ import annotations

import functools
import tempfile
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from clean_cases import CleanCase
from fault import AS_STATED, CLEAN, Fault
from truth import Lattice, true_z2

from topovet.errors import TopovetError
from topovet.pipeline.dossier import start_run
from topovet.pipeline.runner import Run
from topovet.verdict.document import CauseEntry, Verdict
from topovet.verdict.flags import Flag

SETTINGS = {"effort": "quick"}

Z2_CLASSES = frozenset({"strong-ti", "weak-ti", "crystalline-ti", "higher-order", "trivial"})
"""Classes that say something about a gapped phase with time reversal."""

BEYOND_Z2 = frozenset({"higher-order", "crystalline-ti"})
"""Classes that a changed Hamiltonian with all Z2 indices 0 may have: the oracle knows Z2 alone."""


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of a spoiled case.

    Attributes
    ----------
    refused
        The sentence with which the case was refused; "" where there is a verdict.
    z2, class_
        As asserted.
    flags
        As raised, in the order of the verdict.
    causes
        Of the diagnosis, confirmed or possible, no consequence of another; most probable first.
    wrong
        Why the verdict is silently wrong; "" where it is not.
    """

    refused: str
    z2: tuple[int, ...] | None
    class_: str
    flags: tuple[Flag, ...]
    causes: tuple[CauseEntry, ...]
    wrong: str


Named = tuple[str, str, str]
"""Code, severity or answer, and advice, which tells two kinds of one code apart."""


@functools.cache
def background(case: CleanCase) -> frozenset[Named]:
    """Flags and causes that the clean case has already."""
    clean = examine(case)
    return frozenset({*map(_of_flag, clean.flags), *map(_of_cause, clean.causes)})


def _of_flag(flag: Flag) -> Named:
    return flag.code, flag.severity, flag.advice


def _of_cause(cause: CauseEntry) -> Named:
    return cause.cause, cause.answer, cause.advice


def top_cause(case: CleanCase, outcome: Outcome) -> str | None:
    """The first cause that the clean case does not have; None where no new flag is raised.

    Where the diagnosis names none, the first new flag of severity warning or error.
    """
    known = background(case)
    flagged = [
        flag.code
        for flag in outcome.flags
        if flag.severity != "info" and _of_flag(flag) not in known
    ]
    causes = [cause.cause for cause in outcome.causes if _of_cause(cause) not in known]
    return next(iter((*causes, *flagged))) if flagged else None


def start(folder: Path) -> Run:
    """A run whose verdict is that of `vet_case`; figures and page are left out."""
    return start_run(folder, settings=SETTINGS)


def examine(case: CleanCase, fault: Fault | None = None, size: float = 0.0) -> Outcome:
    """Lay the case, spoil it, vet it, judge the verdict; no fault examines the clean case."""
    with tempfile.TemporaryDirectory() as scratch:
        folder = Path(scratch) / "case"
        case.lay(folder)
        if fault is not None:
            fault.apply(folder, size)
        try:
            run = start(folder)
            verdict: Verdict = run.result("verdict")
        except TopovetError as error:
            return Outcome(str(error), None, "undetermined", (), (), "")
        wrong = _silently_wrong(case, fault, verdict, run)
        causes = tuple(
            cause
            for cause in verdict.diagnosis.causes
            if cause.answer != "no" and not cause.consequence_of
        )
        z2, class_ = verdict.invariants.z2, verdict.class_
        return Outcome("", z2, class_, verdict.flags, causes, wrong)


def _silently_wrong(case: CleanCase, fault: Fault | None, verdict: Verdict, run: Run) -> str:
    """What the verdict asserts and should not have; "" if nothing."""
    z2, class_ = verdict.invariants.z2, verdict.class_
    alarmed = any(flag.severity == "error" for flag in verdict.flags)
    if alarmed and (z2 is not None or class_ != "undetermined"):
        return f"asserts {z2} ({class_}) beside a flag of severity error"
    if z2 is None and class_ not in Z2_CLASSES:
        return ""
    if fault is None or _is_as_clean(case, fault, verdict):
        right, right_class = case.z2, case.class_
    else:
        truth = true_z2(_lattice(run), verdict.electrons.filling)
        if truth is None:
            return f"asserts {z2} ({class_}) where no Z2 index exists"
        right, right_class = truth, _class_of(truth)
    if z2 != right:
        return f"asserts {z2}, right is {right}"
    changed = fault is not None and not _is_as_clean(case, fault, verdict)
    if class_ == right_class or (changed and right_class == "trivial" and class_ in BEYOND_Z2):
        return ""
    return f"asserts {class_}, right is {right_class}"


def _is_as_clean(case: CleanCase, fault: Fault, verdict: Verdict) -> bool:
    truth = fault.truth_for(case)
    as_clean = truth == AS_STATED and verdict.electrons.filling == case.filling
    return truth == CLEAN or as_clean


def _lattice(run: Run) -> Lattice:
    """H(R) as read: only faults that leave its reading alone are judged by it."""
    model: Any = run.result("lattice").model
    return Lattice(model.r_cells, model.h_r, run.result("declarations").crystal.periodic)


def _class_of(z2: tuple[int, ...]) -> str:
    if z2[0]:
        return "strong-ti"
    return "weak-ti" if any(z2) else "trivial"
