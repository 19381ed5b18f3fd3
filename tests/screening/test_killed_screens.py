"""Screens that are killed at any moment, alone or two at once: the dossiers are the only truth."""

from __future__ import annotations

import contextlib
import json
import os
import random
import signal
import subprocess
import time
from pathlib import Path

import pytest

from screening_runs import QUICK, Program, results, whole_files

WORK_S = 0.25
"""For each case: several are vetted in this time each on a quiet machine, not all of them."""


def _kill(process: subprocess.Popen[str], *, workers_too: bool) -> None:
    """SIGKILL to the process, and to all that it started or to it alone."""
    with contextlib.suppress(ProcessLookupError):
        if workers_too:
            os.killpg(process.pid, signal.SIGKILL)
        else:
            process.kill()
    process.wait()


def _watch(out: Path, process: subprocess.Popen[str], seconds: float, *, at_work: bool) -> None:
    """Read all results over and over while the screen runs.

    For so many seconds, which with `at_work` begin when a worker has begun with a case.
    """
    deadline = time.monotonic() + (120 if at_work else seconds)
    while process.poll() is None and time.monotonic() < deadline:
        if at_work and _begun(out, process.pid):
            deadline, at_work = time.monotonic() + seconds, False
        whole_files(out)
        time.sleep(0.01)


def _begun(out: Path, pid: int) -> bool:
    """Whether a worker of this screen has claimed a case."""
    workers = _children(pid)
    for claim in out.glob("*/.claim"):
        with contextlib.suppress(OSError, ValueError):
            if json.loads(claim.read_bytes())["pid"] in workers:
                return True
    return False


def _kill_at_random(
    program: Program, cases: Path, folder: Path, expected: dict[str, str], kills: int, seed: int
) -> int:
    """Kill screens until there were so many kills; the number of screens that came to their end.

    A screen is run again after each kill until it ends by itself; then its results are compared
    and another begins in a new folder.
    """
    rng = random.Random(seed)
    whole = killed = 0
    while killed < kills or whole == 0:
        out = folder / f"out{whole}"
        while True:
            process = program.start("screen", cases, "--out", out, *QUICK)
            life = rng.uniform(0.0, WORK_S * len(expected)) if killed < kills else 240.0
            _watch(out, process, life, at_work=rng.random() < 0.8)
            if process.poll() is not None:
                break
            _kill(process, workers_too=rng.random() < 0.7)
            killed += 1
            whole_files(out)
        assert process.returncode == 0
        assert results(out) == expected
        whole += 1
    return whole


@pytest.mark.slow
def test_kills_at_random_moments_change_nothing(
    program: Program, six: Path, undisturbed: dict[str, str], tmp_path: Path
) -> None:
    _kill_at_random(program, six, tmp_path, undisturbed, kills=2, seed=1)


@pytest.mark.endurance
def test_fifty_kills_at_random_moments_change_nothing(
    program: Program,
    twelve: Path,
    twelve_undisturbed: dict[str, str],
    tmp_path: Path,
    capsys: pytest.CaptureFixture[str],
) -> None:
    started = time.monotonic()
    whole = _kill_at_random(program, twelve, tmp_path, twelve_undisturbed, kills=50, seed=2)
    with capsys.disabled():
        print(f"\n50 kills in {time.monotonic() - started:.0f} s, {whole} whole screens")


@pytest.mark.slow
def test_two_screens_at_once_share_the_work_and_agree(
    program: Program, six: Path, undisturbed: dict[str, str], tmp_path: Path
) -> None:
    out = tmp_path / "out"
    words = ("screen", six, "--out", out, "--workers", "1", *QUICK)
    both = [program.start(*words) for _ in range(2)]
    while any(process.poll() is None for process in both):
        whole_files(out)
        time.sleep(0.01)
    assert [process.returncode for process in both] == [0, 0]
    assert results(out) == undisturbed
    assert not list(out.rglob(".*"))
    # each vetted a part; at the end one may help itself to what the other is still at
    lines = (out / "screen.log").read_text().splitlines()
    vetted = [line for line in lines if "/6] M" in line and "unchanged" not in line]
    assert len(vetted) < 9


@pytest.mark.endurance  # a worker that crashes and one of Dask that is killed are met elsewhere
def test_a_worker_that_is_killed_costs_nothing(
    program: Program, six: Path, undisturbed: dict[str, str], tmp_path: Path
) -> None:
    out = tmp_path / "out"
    process = program.start("screen", six, "--out", out, "--workers", "2", *QUICK)
    deadline = time.monotonic() + 60
    while not list(out.glob("*/.claim")) and time.monotonic() < deadline:
        time.sleep(0.005)
    for pid in _children(process.pid):
        os.kill(pid, signal.SIGKILL)
    assert process.wait(120) == 0
    assert results(out) == undisturbed


def _children(pid: int) -> list[int]:
    try:
        text = Path(f"/proc/{pid}/task/{pid}/children").read_text()
    except OSError:
        return []
    return [int(word) for word in text.split()]
