"""The first-principles cases in `fixtures/`, vetted once for all tests of a process."""

from __future__ import annotations

import functools
import json
from pathlib import Path
from typing import Any

from topovet.pipeline.dossier import start_run
from topovet.pipeline.runner import Run
from topovet.verdict.document import Verdict

CASES = Path(__file__).parents[1] / "fixtures" / "cases"
CENTROSYMMETRIC = tuple(sorted(p.parent.name for p in CASES.glob("*/dft_parity.json")))


@functools.lru_cache(maxsize=4)  # tests of a case come one after the other
def run_of(case: str, effort: str = "standard") -> Run:
    """A run in memory, so that tests of several files share what it has computed."""
    return start_run(CASES / case, settings={"effort": effort})


@functools.cache
def vetted(case: str) -> Verdict:
    """The verdict at quick effort; the proved gap and surfaces have tests of their own."""
    verdict: Verdict = run_of(case, "quick").result("verdict")
    return verdict


@functools.cache
def vetted_in_full(case: str) -> Verdict:
    """The verdict at standard effort, surfaces and proof included."""
    verdict: Verdict = run_of(case).result("verdict")
    return verdict


@functools.cache
def reference(case: str, file: str) -> dict[str, Any]:
    """A JSON file of the first-principles side, which is no input of the package."""
    loaded: dict[str, Any] = json.loads((CASES / case / file).read_text())
    return loaded
