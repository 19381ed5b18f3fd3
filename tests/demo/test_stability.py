"""The same input gives the same bytes: in any folder, process, hash seed and number of threads."""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from real_cases import CASES
from topovet.demo.campaign import COMPOUNDS
from topovet.demo.writer import write_draft

THREADS = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS")

TASKS_SECTION = re.compile(r'<section id="tasks".*?</section>', re.DOTALL)
"""What was run and how long it took: the one part of a report that tells of the run itself."""


@dataclass(frozen=True, slots=True)
class Written:
    """What a run left: the verdict without its times, the report without its tasks, figures."""

    verdict: str
    report: str
    figures: dict[str, str]


def _vet(case: Path, out: Path, *, seed: int, threads: int, cwd: Path) -> Written:
    variables = dict.fromkeys(THREADS, str(threads)) | {"PYTHONHASHSEED": str(seed)}
    words = [sys.executable, "-m", "topovet", "vet", str(case), "--out", str(out)]
    done = subprocess.run(
        words, cwd=cwd, env={**os.environ, **variables}, capture_output=True, text=True
    )
    assert done.returncode == 0, done.stderr
    return _read(out)


def _read(out: Path) -> Written:
    verdict: dict[str, Any] = json.loads((out / "verdict.json").read_text())
    assert verdict["provenance"].pop("task_seconds")
    report, n_cut = TASKS_SECTION.subn("", (out / "report.html").read_text())
    assert n_cut == 1
    figures = {p.name: p.read_text() for p in sorted((out / "figures").iterdir())}
    assert figures.pop("tasks.svg")
    return Written(json.dumps(verdict, indent=1), report, figures)


def _lay(name: str, folder: Path) -> Path:
    compound = next((c for c in COMPOUNDS if c.code == name), None)
    if compound is None:
        shutil.copytree(CASES / name, folder)
    else:
        write_draft(compound.draft(), folder, name)
    return folder


@pytest.mark.parametrize(
    "name",
    [
        pytest.param("GX-06", marks=pytest.mark.endurance),  # 16 bands, triclinic
        pytest.param("GX-19", marks=pytest.mark.endurance),  # the longest diagnosis
        pytest.param("CdTe", marks=[pytest.mark.real_data, pytest.mark.endurance]),
        "GX-12",
    ],
)
def test_folder_process_hash_seed_and_threads_do_not_matter(name: str, tmp_path: Path) -> None:
    here = _lay(name, tmp_path / "one" / "first")
    there = _lay(name, tmp_path / "quite another place" / "zwei")
    first = _vet(here, tmp_path / "a", seed=1, threads=1, cwd=tmp_path)
    second = _vet(there, tmp_path / "deep" / "b", seed=77, threads=4, cwd=tmp_path / "one")
    assert second.verdict == first.verdict
    assert second.figures == first.figures
    assert second.report == first.report
    # all but the times once more from the stored results
    recalled = _vet(here, tmp_path / "a", seed=5, threads=2, cwd=tmp_path)
    assert recalled == first


@pytest.mark.endurance  # threads are turned above
def test_number_of_processors_does_not_matter(tmp_path: Path) -> None:
    """Held to one processor, as in a job array, or free."""
    if not hasattr(os, "sched_setaffinity") or len(os.sched_getaffinity(0)) < 2:
        pytest.skip("needs a system that binds processes, and two processors")
    case = _lay("GX-12", tmp_path / "case")
    free = _vet(case, tmp_path / "free", seed=0, threads=2, cwd=tmp_path)
    all_of_them = os.sched_getaffinity(0)
    try:
        os.sched_setaffinity(0, {min(all_of_them)})
        held = _vet(case, tmp_path / "held", seed=0, threads=2, cwd=tmp_path)
    finally:
        os.sched_setaffinity(0, all_of_them)
    assert held == free
