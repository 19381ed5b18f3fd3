"""A case that takes longer than it may is given up, and costs the others nothing."""

from __future__ import annotations

import json
import os
import signal
from contextlib import closing
from dataclasses import replace
from pathlib import Path

import pytest
from click.testing import CliRunner

from screening_runs import write_small_cases
from topovet.cli.screen import command
from topovet.screening import dask_task
from topovet.screening.dask_task import vet_on_dask
from topovet.screening.engine import run_cases
from topovet.screening.local_pool import LocalPool
from topovet.screening.pool import Finished
from topovet.screening.records import Job, Outcome, ScreenCase


def _job(slug: str, folder: Path, limit_s: float | None) -> Job:
    return Job(slug, slug, f"/nowhere/{slug}", str(folder), {}, False, True, "", limit_s)


def test_a_process_that_hangs_is_killed_when_its_time_is_up(tmp_path: Path) -> None:
    with closing(LocalPool(2, None)) as pool:
        pool.submit(_job("hangs", tmp_path, 0.3))
        (hanging,) = pool._busy.values()
        os.kill(hanging.pid, signal.SIGSTOP)
        pool.submit(_job("fails", tmp_path, 60.0))
        first, second = [*pool.wait(), *pool.wait()]
        assert (first.slug, first.outcome, first.for_good) == ("hangs", None, True)
        assert first.lost == "it took longer than the limit of 0.005 minutes"
        assert hanging.exit_code == -signal.SIGKILL
        assert second.slug == "fails"
        assert second.outcome is not None
        assert second.outcome.status == "failed"


def test_a_case_given_up_is_not_tried_again() -> None:
    case = ScreenCase("slow", "slow", "/slow", {})
    settled: list[tuple[Outcome, bool]] = []

    class Impatient:
        about, slots, memory_bytes = "pretended", 1, None
        submitted = 0

        def submit(self, job: Job) -> None:
            self.submitted += 1

        def wait(self) -> list[Finished]:
            return [Finished("slow", None, "it took longer than the limit", for_good=True)]

        def close(self) -> None:
            pass

    pool = Impatient()
    run_cases(
        [case],
        pool,
        lambda case, heed: _job("slow", Path("/out"), 1.0),
        lambda case, outcome, unrecorded: settled.append((outcome, unrecorded)),
    )
    assert pool.submitted == 1
    ((outcome, unrecorded),) = settled
    assert (outcome.status, unrecorded) == ("failed", True)
    assert "it took longer than the limit; its finished tasks are kept" in outcome.message


def test_a_dask_worker_gives_up_too_and_takes_the_next_case(tmp_path: Path) -> None:
    job = _job("slow", tmp_path, 0.01)
    answer = json.loads(vet_on_dask(job.to_json()))
    assert answer == {"lost": "it took longer than the limit of 0.000166667 minutes"} | {
        "for_good": True
    }
    after = Outcome.from_json(vet_on_dask(replace(job, limit_s=None).to_json()))
    assert after.status == "failed"
    dask_task._local.worker.stop()


def test_the_screen_records_what_it_gave_up(tmp_path: Path) -> None:
    write_small_cases(tmp_path / "cases", 2)
    words = [str(tmp_path / "cases"), "--out", str(tmp_path / "out")]
    done = CliRunner().invoke(command, [*words, "--time-limit", "0.001", "--workers", "1"])
    assert done.exit_code == 1
    failures = [json.loads(p.read_text()) for p in (tmp_path / "out").glob("*/failure.json")]
    assert len(failures) == 2
    for failure in failures:
        assert "longer than the limit of 0.001 minutes" in failure["error"]["message"]


@pytest.mark.parametrize("limit", ["0", "-1", "soon"])
def test_a_limit_must_be_positive(limit: str, tmp_path: Path) -> None:
    words = [str(tmp_path), "--out", str(tmp_path / "out"), "--time-limit", limit]
    assert CliRunner().invoke(command, words).exit_code == 2
