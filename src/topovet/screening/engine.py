"""Deals cases out to workers: by size and memory, once more where a worker was lost."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass

from topovet.errors import TopovetError
from topovet.screening.pool import Finished, Pool
from topovet.screening.records import Job, Outcome, ScreenCase

MakeJob = Callable[[ScreenCase, bool], Job]
"""(case, whether claims of others are heeded) -> job."""


class ScreenError(TopovetError):
    """The screen as a whole cannot go on."""


@dataclass(frozen=True, slots=True)
class _Turn:
    """A case that waits for its turn.

    Attributes
    ----------
    alone
        Whether nothing else may run beside it, since a worker was lost with it.
    heed_claims
        Whether it may be put off because another process is at it.
    """

    case: ScreenCase
    alone: bool = False
    heed_claims: bool = True


def run_cases(
    cases: Iterable[ScreenCase],
    pool: Pool,
    make_job: MakeJob,
    settle: Callable[[ScreenCase, Outcome, bool], None],
) -> None:
    """Run every case to its end.

    Large cases go first, so that none is left to run alone at the end. A case starts when a worker
    is free and its memory fits beside that of those that run; one that fits nowhere runs alone.
    Where a worker is lost, its case is tried once more, after all others and alone; one that takes
    longer than it may is given up. A case that
    another process is at is put off to the end, and then vetted all the same.

    Parameters
    ----------
    cases
        In any order.
    pool
        Workers.
    make_job
        See `MakeJob`.
    settle
        Hears of each case once, when it has ended; with True where no worker is left that could
        have recorded its failure.

    Raises
    ------
    ScreenError
        Results cannot be written, or workers run other code than this process.
    """
    waiting = [_Turn(case) for case in sorted(cases, key=lambda c: (-c.size_bytes, c.slug))]
    running: dict[str, _Turn] = {}
    while waiting or running:
        while (turn := _next_turn(waiting, running, pool)) is not None:
            waiting.remove(turn)
            running[turn.case.slug] = turn
            pool.submit(make_job(turn.case, turn.heed_claims))
        for finished in pool.wait():
            turn = running.pop(finished.slug)
            again = _again(turn, finished)
            if again is not None:
                waiting.append(again)
            else:
                settle(turn.case, _outcome(turn, finished), finished.outcome is None)


def _next_turn(waiting: list[_Turn], running: dict[str, _Turn], pool: Pool) -> _Turn | None:
    """The first that may start now."""
    if len(running) >= pool.slots or any(turn.alone for turn in running.values()):
        return None
    taken = sum(turn.case.memory_bytes for turn in running.values())
    for turn in waiting:
        if not running:
            # those that need the machine to themselves come when nothing else waits
            if not turn.alone or all(other.alone for other in waiting):
                return turn
        elif not turn.alone and _fits(turn.case, taken, pool):
            return turn
    return None


def _fits(case: ScreenCase, taken: int, pool: Pool) -> bool:
    return pool.memory_bytes is None or taken + case.memory_bytes <= pool.memory_bytes


def _again(turn: _Turn, finished: Finished) -> _Turn | None:
    """The same case once more, where that makes sense."""
    if finished.outcome is None:
        if turn.alone or finished.for_good:
            return None
        return _Turn(turn.case, alone=True, heed_claims=False)
    if finished.outcome.status == "claimed":
        return _Turn(turn.case, turn.alone, heed_claims=False)
    return None


def _outcome(turn: _Turn, finished: Finished) -> Outcome:
    outcome = finished.outcome
    if outcome is None and finished.for_good:
        return Outcome(
            turn.case.slug,
            "failed",
            message=f"the case was given up: {finished.lost}; its finished tasks are kept, run it "
            "again with more time or less effort.",
            file=turn.case.path,
        )
    if outcome is None:
        gib = turn.case.memory_bytes / 2**30
        return Outcome(
            turn.case.slug,
            "failed",
            message=f"the case was given up after two attempts: {finished.lost}; by its size it "
            f"takes about {gib:.1f} GiB of memory.",
            file=turn.case.path,
        )
    if outcome.status == "no-room":
        raise ScreenError(outcome.message)
    if outcome.status == "other-code":
        raise ScreenError(
            f"{turn.case.slug}: {outcome.message}; install the same one everywhere, so that "
            "results do not depend on where they were made."
        )
    return outcome
