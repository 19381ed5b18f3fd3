"""How cases are dealt out, with workers that only pretend."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from topovet.screening.engine import ScreenError, run_cases
from topovet.screening.pool import Finished
from topovet.screening.records import Job, Outcome, ScreenCase

Behaviour = Callable[[Job, int], Finished]


class PretendedPool:
    """Ends the job that was submitted first; notes what ran beside what."""

    about = "pretended"

    def __init__(self, slots: int, memory: int | None, behave: Behaviour) -> None:
        self.slots, self.memory_bytes, self._behave = slots, memory, behave
        self.running: list[Job] = []
        self.beside: list[tuple[str, ...]] = []
        self.attempts: dict[str, int] = {}

    def submit(self, job: Job) -> None:
        assert len(self.running) < self.slots
        self.running.append(job)
        self.beside.append(tuple(j.slug for j in self.running))
        self.attempts[job.slug] = self.attempts.get(job.slug, 0) + 1

    def wait(self) -> list[Finished]:
        job = self.running.pop(0)
        return [self._behave(job, self.attempts[job.slug])]

    def close(self) -> None:
        pass


def _case(slug: str, size: int = 1, memory: int = 1) -> ScreenCase:
    return ScreenCase(slug, slug, f"/{slug}", {}, size, memory)


def _job(case: ScreenCase, heed_claims: bool) -> Job:
    return Job(case.slug, case.name, case.path, "/out", {}, False, heed_claims, "c")


def _vet(job: Job, attempt: int) -> Finished:
    return Finished(job.slug, Outcome(job.slug, "vetted", "trivial"))


def _run(
    cases: list[ScreenCase], slots: int, memory: int | None, behave: Behaviour
) -> tuple[PretendedPool, list[tuple[Outcome, bool]]]:
    pool = PretendedPool(slots, memory, behave)
    settled: list[tuple[Outcome, bool]] = []
    run_cases(cases, pool, _job, lambda case, outcome, lost: settled.append((outcome, lost)))
    return pool, settled


def test_every_case_is_run_once_and_the_largest_first() -> None:
    pool, settled = _run([_case("a", 1), _case("b", 3), _case("c", 2)], 1, None, _vet)
    assert [outcome.slug for outcome, _ in settled] == ["b", "c", "a"]
    assert set(pool.attempts.values()) == {1}


def test_memory_is_respected_and_small_cases_fill_the_gap() -> None:
    giants = [_case("g1", 9, 60), _case("g2", 8, 60)]
    small = [_case(f"s{i}", 1, 20) for i in range(4)]
    pool, settled = _run([*giants, *small], 3, 100, _vet)
    assert not any({"g1", "g2"} <= set(beside) for beside in pool.beside)
    assert ("g1", "s0", "s1") in pool.beside
    assert len(settled) == 6


def test_what_fits_nowhere_runs_alone() -> None:
    pool, settled = _run([_case("g", 9, 500), _case("s", 1, 20)], 2, 100, _vet)
    assert pool.beside == [("g",), ("s",)]
    assert len(settled) == 2


def test_a_lost_case_is_tried_once_more_alone_and_last() -> None:
    def behave(job: Job, attempt: int) -> Finished:
        lost = job.slug == "b" and attempt == 1
        return Finished(job.slug, None, "killed") if lost else _vet(job, attempt)

    cases = [_case("a", 4), _case("b", 3), _case("c", 2), _case("d", 1)]
    pool, settled = _run(cases, 2, None, behave)
    assert pool.beside[-1] == ("b",)
    assert [(outcome.status, lost) for outcome, lost in settled] == [("vetted", False)] * 4


def test_several_lost_cases_run_one_after_the_other() -> None:
    def behave(job: Job, attempt: int) -> Finished:
        return Finished(job.slug, None, "killed") if attempt == 1 else _vet(job, attempt)

    pool, settled = _run([_case("a"), _case("b"), _case("c")], 3, None, behave)
    assert pool.beside[-3:] == [("a",), ("b",), ("c",)]
    assert len(settled) == 3


def test_a_case_that_is_lost_twice_is_given_up_with_the_reason() -> None:
    def behave(job: Job, attempt: int) -> Finished:
        lost = job.slug == "b"
        return Finished(job.slug, None, "the process was killed") if lost else _vet(job, attempt)

    pool, settled = _run([_case("a"), _case("b", 1, 3 << 30), _case("c")], 2, None, behave)
    (failed,) = [(outcome, lost) for outcome, lost in settled if outcome.status == "failed"]
    assert failed[1] is True
    assert "two attempts: the process was killed" in failed[0].message
    assert "about 3.0 GiB" in failed[0].message
    assert pool.attempts == {"a": 1, "b": 2, "c": 1}


def test_a_claimed_case_comes_last_and_is_vetted_all_the_same() -> None:
    heeded = []

    def behave(job: Job, attempt: int) -> Finished:
        if job.slug == "a":
            heeded.append(job.heed_claims)
            if job.heed_claims:
                return Finished("a", Outcome("a", "claimed"))
        return _vet(job, attempt)

    _, settled = _run([_case("a", 9), _case("b"), _case("c")], 1, None, behave)
    assert [outcome.slug for outcome, _ in settled] == ["b", "c", "a"]
    assert heeded == [True, False]


@pytest.mark.parametrize("status", ["no-room", "other-code"])
def test_what_would_befall_every_case_ends_the_screen(status: str) -> None:
    def behave(job: Job, attempt: int) -> Finished:
        return Finished(job.slug, Outcome(job.slug, status, message="because"))  # type: ignore[arg-type]

    with pytest.raises(ScreenError, match="because"):
        _run([_case("a"), _case("b")], 1, None, behave)
