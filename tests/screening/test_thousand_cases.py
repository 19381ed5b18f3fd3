"""A thousand tiny cases: what a screen costs around them, and that its memory stays flat."""

from __future__ import annotations

import shutil
import subprocess
import time
from pathlib import Path

import pytest

from screening_runs import QUICK, Program, write_small_cases

pytestmark = pytest.mark.endurance

COUNT = 1000


def test_a_thousand_cases(
    program: Program, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (model,) = write_small_cases(tmp_path / "model", 1)
    for i in range(COUNT):
        shutil.copytree(model, tmp_path / "cases" / f"T{i:04d}")
    out = tmp_path / "out"
    started = time.monotonic()
    process = program.start("screen", tmp_path / "cases", "--out", out, "--workers", "2", *QUICK)
    memory: list[tuple[int, int]] = []
    while process.poll() is None:
        done = _lines(out / "screen.log") - 1
        rss = sum(_resident(pid) for pid in (process.pid, *_children(process.pid)))
        memory.append((done, rss))
        time.sleep(1.0)
    wall = time.monotonic() - started
    assert process.returncode == 0
    assert len(list(out.glob("*/screened.json"))) == COUNT
    early = max(rss for done, rss in memory if 50 <= done <= 200)
    late = max(rss for done, rss in memory if done >= COUNT - 150)
    vetting = _vetting_seconds(out / "screen.log")
    again = _seconds(program, tmp_path / "cases", out)
    with capsys.disabled():
        print(
            f"\n{COUNT} cases in {wall:.0f} s on 2 workers; around each case "
            f"{1000 * (2 * wall - vetting) / COUNT:.0f} ms of a worker; memory of all processes "
            f"{early >> 20} MiB early, {late >> 20} MiB late; unchanged "
            f"{1000 * again / COUNT:.1f} ms a case"
        )
    assert late < 1.15 * early


def _seconds(program: Program, root: Path, out: Path) -> float:
    started = time.monotonic()
    done = program.run("screen", root, "--out", out, "--workers", "2", *QUICK)
    assert f"{COUNT} unchanged" in done.stdout
    return time.monotonic() - started


def _vetting_seconds(log: Path) -> float:
    """Sum of the seconds that the lines of the cases state."""
    parts = [line.partition("; ")[0] for line in log.read_text().splitlines() if "] T" in line]
    return sum(float(part.rsplit(", ", 1)[1].removesuffix(" s")) for part in parts)


def _lines(path: Path) -> int:
    return path.read_bytes().count(b"\n") if path.exists() else 0


def _children(pid: int) -> list[int]:
    done = subprocess.run(["ps", "-o", "pid=", "--ppid", str(pid)], capture_output=True, text=True)
    return [int(word) for word in done.stdout.split()]


def _resident(pid: int) -> int:
    """Resident memory in bytes; 0 for a process that has ended."""
    try:
        lines = Path(f"/proc/{pid}/status").read_text().splitlines()
    except OSError:
        return 0
    return next((int(l.split()[1]) * 1024 for l in lines if l.startswith("VmRSS:")), 0)
