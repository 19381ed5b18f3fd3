"""What the machine has to give, and being told to stop."""

from __future__ import annotations

import os
import signal
from pathlib import Path

import pytest

from topovet.screening import machine
from topovet.screening.machine import available_memory, processors
from topovet.screening.stopping import Stopped, stop_signals


@pytest.fixture(autouse=True)
def _outside_a_job(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    for name in ("SLURM_CPUS_PER_TASK", "SLURM_MEM_PER_NODE", "SLURM_MEM_PER_CPU"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setattr(machine, "_CGROUP", tmp_path)


def test_a_job_bounds_processors_and_memory(monkeypatch: pytest.MonkeyPatch) -> None:
    assert processors() == len(os.sched_getaffinity(0))
    free = available_memory()
    assert free is not None
    assert free > 1 << 20
    monkeypatch.setenv("SLURM_CPUS_PER_TASK", "1")
    assert processors() == 1
    monkeypatch.setenv("SLURM_MEM_PER_CPU", "64")
    assert available_memory() == 64 << 20
    monkeypatch.setenv("SLURM_MEM_PER_NODE", "100")
    assert available_memory() == 100 << 20


@pytest.mark.parametrize("text", ["", "x", "-3", "1(x2)"])
def test_what_a_job_says_oddly_is_not_believed(monkeypatch: pytest.MonkeyPatch, text: str) -> None:
    monkeypatch.setenv("SLURM_CPUS_PER_TASK", text)
    assert processors() == len(os.sched_getaffinity(0))


def test_a_container_bounds_memory(tmp_path: Path) -> None:
    (tmp_path / "memory.max").write_text("max\n")
    (tmp_path / "memory.current").write_text("1000\n")
    assert available_memory() != 1000
    (tmp_path / "memory.max").write_text("5000\n")
    assert available_memory() == 4000
    (tmp_path / "memory.current").write_text("6000\n")
    assert available_memory() == 0


@pytest.mark.parametrize("signum", [signal.SIGINT, signal.SIGTERM])
def test_a_signal_stops_once_and_handlers_come_back(signum: signal.Signals) -> None:
    before = signal.getsignal(signum)

    def told_to_stop() -> None:
        with stop_signals():
            try:
                os.kill(os.getpid(), signum)
            finally:  # while workers are being stopped, an impatient user changes nothing
                os.kill(os.getpid(), signum)

    with pytest.raises(Stopped, match=signum.name) as stopped:
        told_to_stop()
    assert stopped.value.signum == signum
    assert signal.getsignal(signum) is before
