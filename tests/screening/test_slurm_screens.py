"""The job scripts on a real Slurm with one node: an array, a task that is requeued, a shortlist."""

from __future__ import annotations

import shutil
import sys
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from screening_runs import QUICK, Program, results
from slurm_node import Slurm, why_not

pytestmark = pytest.mark.slow

WORKFLOWS = Path(__file__).parents[2] / "workflows"

TINY = ("--mem=500", "--time=10")


@pytest.fixture
def slurm(program: Program, tmp_path: Path) -> Iterator[Slurm]:
    reason = why_not()
    if reason:
        pytest.skip(reason)
    launcher = tmp_path / "topovet"
    launcher.write_text(f'#!/bin/sh\nexec "{sys.executable}" -m topovet "$@"\n')
    launcher.chmod(0o755)
    # the path of a socket is limited to about a hundred bytes
    folder = Path(tempfile.mkdtemp(prefix="slurm"))
    running = Slurm(folder, {**program.environment, "TOPOVET": str(launcher)})
    try:
        try:
            running.start()
        except RuntimeError as error:
            pytest.skip(f"Slurm does not start here: {error}")
        yield running
    finally:
        running.stop()
        shutil.rmtree(folder, ignore_errors=True)


def test_an_array_with_a_requeued_task_gives_what_a_local_screen_gives(
    slurm: Slurm, six: Path, undisturbed: dict[str, str], tmp_path: Path
) -> None:
    out = tmp_path / "out"
    words = (str(six), str(out), *QUICK)
    array = slurm.submit(
        *TINY, "--array=1-2", str(WORKFLOWS / "slurm-array.sh"), *words, cwd=tmp_path
    )
    last = slurm.submit(
        *(*TINY, f"--dependency=afterany:{array}", str(WORKFLOWS / "slurm-shortlist.sh"), *words),
        cwd=tmp_path,
    )
    task = f"{array}_1"
    deadline = time.monotonic() + 120
    while not list(out.glob("M00/screened.json")) and time.monotonic() < deadline:
        time.sleep(0.05)
    assert slurm.state(task) == "RUNNING"
    # what happens to a task that is preempted
    slurm.query("scontrol", "requeue", task)
    while slurm.state(task) != "PENDING" and time.monotonic() < deadline:
        time.sleep(0.05)
    slurm.query("scontrol", "update", f"jobid={task}", "starttime=now")  # no need to wait minutes
    slurm.wait_until_empty(240)
    assert "Restarts=1" in slurm.query("scontrol", "-o", "show", "job", task)
    for job in (*(f"{array}_{i}" for i in (1, 2)), last):
        assert slurm.state(job) == "COMPLETED", (tmp_path / f"topovet-{array}_1.log").read_text()
    assert {name: text for name, text in results(out).items() if text != "{}"} == undisturbed
    log = (out / "screen-1of2.log").read_text()
    assert "stopped by SIGTERM" in log
    assert "2 cases to vet, 1 up to date" in log or "1 cases to vet, 2 up to date" in log
    swept = (tmp_path / f"topovet-shortlist-{last}.log").read_text()
    assert "0 vetted, 6 unchanged, 0 failed" in swept
    assert (out / "shortlist.html").exists()


def test_the_scripts_say_how_they_are_used() -> None:
    import subprocess

    for name in ("slurm-array.sh", "slurm-shortlist.sh"):
        done = subprocess.run(["bash", WORKFLOWS / name], capture_output=True, text=True)
        assert done.returncode == 2
        assert "usage: sbatch" in done.stderr
