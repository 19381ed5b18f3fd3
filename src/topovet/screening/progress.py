"""How far a screen is: cases an hour so far, and an estimate of the time left."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable

from topovet.screening.records import Outcome, ScreenCase, Step

BASE_WORK = 1 << 20
"""What a case costs whatever its size, in bytes of Hamiltonian file that take as long to vet."""


class Progress:
    """Counts cases and weighs what is left by the size of its files.

    Parameters
    ----------
    cases
        All cases that are to be run.
    done
        Cases that were up to date.
    clock
        Seconds.
    """

    def __init__(
        self,
        cases: Iterable[ScreenCase],
        done: int,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self._left = {case.slug: case.size_bytes + BASE_WORK for case in cases}
        self._total = done + len(self._left)
        self._clock = clock
        self._started = clock()
        self._n_run = self._work = 0

    def step(self, case: ScreenCase, outcome: Outcome) -> Step:
        """Note that a case has ended."""
        self._work += self._left.pop(case.slug)
        self._n_run += 1
        elapsed = max(self._clock() - self._started, 1e-3)
        left = sum(self._left.values())
        return Step(
            case=case,
            outcome=outcome,
            done=self._total - len(self._left),
            total=self._total,
            per_hour=3600 * self._n_run / elapsed,
            left_s=elapsed * left / self._work,
        )
