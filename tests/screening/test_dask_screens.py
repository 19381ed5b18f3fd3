"""Screens on a real Dask scheduler with two worker processes, all on the loopback address."""

from __future__ import annotations

import contextlib
import importlib.util
import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path

import pytest

from screening_runs import QUICK, Program, results

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(
        importlib.util.find_spec("distributed") is None,
        reason="Dask is not installed (extra topovet[dask])",
    ),
]

LOCAL = ("--host", "127.0.0.1", "--no-dashboard")


@dataclass
class Cluster:
    """A scheduler and its workers, each a process group."""

    program: Program
    folder: Path
    processes: list[subprocess.Popen[bytes]] = field(default_factory=list)

    @property
    def scheduler_file(self) -> Path:
        return self.folder / "scheduler.json"

    def start(self, *words: str) -> subprocess.Popen[bytes]:
        command = [sys.executable, "-m", "dask", *words]
        with (self.folder / f"dask-{len(self.processes)}.log").open("wb") as log:
            process = subprocess.Popen(
                [*command, "--scheduler-file", str(self.scheduler_file)],
                env=self.program.environment,
                cwd=self.folder,
                stdout=log,
                stderr=subprocess.STDOUT,
                start_new_session=True,
            )
        self.processes.append(process)
        return process

    def start_worker(self, name: str) -> subprocess.Popen[bytes]:
        """One thread, no nanny: a worker that is killed stays dead."""
        options = ("--nthreads", "1", "--no-nanny", "--name", name)
        place = ("--local-directory", str(self.folder / name))
        return self.start("worker", *LOCAL, *options, *place)

    def stop(self) -> None:
        for process in self.processes:
            with contextlib.suppress(ProcessLookupError):
                os.killpg(process.pid, signal.SIGKILL)
            process.wait()


@pytest.fixture
def cluster(program: Program, tmp_path: Path) -> Iterator[Cluster]:
    running = Cluster(program, tmp_path)
    try:
        running.start("scheduler", *LOCAL, "--port", "0")
        yield running
    finally:
        running.stop()


def test_a_worker_that_is_killed_midway_costs_nothing(
    program: Program, six: Path, undisturbed: dict[str, str], cluster: Cluster, tmp_path: Path
) -> None:
    first, _ = cluster.start_worker("first"), cluster.start_worker("second")
    _wait_for(cluster.scheduler_file)
    out = tmp_path / "out"
    process = program.start("screen", six, "--out", out, "--dask", cluster.scheduler_file, *QUICK)
    deadline = time.monotonic() + 120
    while len(list(out.glob("*/verdict.json"))) < 2 and time.monotonic() < deadline:
        time.sleep(0.01)
    assert process.poll() is None
    os.killpg(first.pid, signal.SIGKILL)
    assert process.wait(180) == 0
    assert first.poll() == -signal.SIGKILL
    assert results(out) == undisturbed
    assert "2 threads of Dask workers" in (out / "screen.log").read_text()


@pytest.mark.endurance
def test_the_address_of_the_scheduler_does_as_well(
    program: Program, six: Path, undisturbed: dict[str, str], cluster: Cluster, tmp_path: Path
) -> None:
    cluster.start_worker("only")
    address = json.loads(_wait_for(cluster.scheduler_file).read_text())["address"]
    out = tmp_path / "out"
    done = program.run("screen", six, "--out", out, "--dask", address, *QUICK)
    assert done.returncode == 0, done.stderr
    assert "6 vetted" in done.stdout
    assert results(out) == undisturbed


@pytest.mark.endurance
def test_no_scheduler_is_one_sentence(program: Program, six: Path, tmp_path: Path) -> None:
    words = ("--out", tmp_path / "out", "--dask", "tcp://127.0.0.1:9")
    done = program.run("screen", six, *words, *QUICK)
    assert done.returncode == 1
    assert "no Dask scheduler answers at tcp://127.0.0.1:9" in done.stderr


def test_without_dask_the_install_line_is_shown(
    program: Program, six: Path, tmp_path: Path
) -> None:
    hidden = tmp_path / "hidden"
    hidden.mkdir()
    (hidden / "distributed.py").write_text("raise ImportError('hidden by the test')\n")
    environment = {**program.environment, "PYTHONPATH": f"{hidden}:{program.folder}"}
    done = subprocess.run(
        program.command("screen", six, "--out", tmp_path / "out", "--dask", "x"),
        env=environment,
        capture_output=True,
        text=True,
    )
    assert done.returncode == 1
    assert 'pip install "topovet[dask]"' in done.stderr


def _wait_for(path: Path) -> Path:
    deadline = time.monotonic() + 60
    while not path.exists() and time.monotonic() < deadline:
        time.sleep(0.05)
    time.sleep(0.2)
    return path
