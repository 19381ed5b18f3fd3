"""Claims: a hint about who is at a case, never more."""

from __future__ import annotations

import json
import os
import socket
import subprocess
import sys
import time
from pathlib import Path

import pytest

from topovet.screening.claims import CLAIM_FILE, STALE_AFTER_S, claim, claimed_by_another


def _foreign(folder: Path, *, host: str, pid: int) -> Path:
    path = folder / CLAIM_FILE
    path.write_text(json.dumps({"host": host, "pid": pid}))
    return path


def test_a_claim_of_ones_own_is_no_obstacle_and_ends(tmp_path: Path) -> None:
    with claim(tmp_path / "new"):
        assert (tmp_path / "new" / CLAIM_FILE).exists()
        assert not claimed_by_another(tmp_path / "new")
    assert not (tmp_path / "new" / CLAIM_FILE).exists()


def test_a_living_process_and_another_machine_count(tmp_path: Path) -> None:
    _foreign(tmp_path, host=socket.gethostname(), pid=os.getppid())
    assert claimed_by_another(tmp_path)
    _foreign(tmp_path, host="elsewhere", pid=1)
    assert claimed_by_another(tmp_path)


def test_a_dead_process_does_not_count(tmp_path: Path) -> None:
    done = subprocess.Popen([sys.executable, "-c", ""])
    done.wait()
    _foreign(tmp_path, host=socket.gethostname(), pid=done.pid)
    assert not claimed_by_another(tmp_path)


@pytest.mark.parametrize("shift", [-STALE_AFTER_S - 1, STALE_AFTER_S + 60])
def test_a_claim_that_is_not_renewed_or_from_the_future_does_not_count(
    tmp_path: Path, shift: float
) -> None:
    path = _foreign(tmp_path, host="elsewhere", pid=1)
    os.utime(path, (time.time() + shift,) * 2)
    assert not claimed_by_another(tmp_path)


@pytest.mark.parametrize("text", ["", "{", "[]", '{"host": "x"}', '{"host": "x", "pid": "y"}'])
def test_a_damaged_claim_does_not_count(tmp_path: Path, text: str) -> None:
    (tmp_path / CLAIM_FILE).write_text(text)
    assert not claimed_by_another(tmp_path)


def test_where_no_claim_can_be_written_the_work_goes_on(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with claim(tmp_path / "file" / "folder"):
        worked = True
    assert worked


def test_a_claim_that_another_has_taken_over_is_left_to_it(tmp_path: Path) -> None:
    with claim(tmp_path):
        _foreign(tmp_path, host="elsewhere", pid=1)
    assert claimed_by_another(tmp_path)


def test_claims_are_renewed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("topovet.screening.claims.RENEWED_EVERY_S", 0.01)
    with claim(tmp_path):
        os.utime(tmp_path / CLAIM_FILE, (1, 1))
        deadline = time.monotonic() + 10
        while (tmp_path / CLAIM_FILE).stat().st_mtime < 2 and time.monotonic() < deadline:
            time.sleep(0.01)
        assert (tmp_path / CLAIM_FILE).stat().st_mtime > 2
