"""What the engine asks of a set of workers, wherever they are."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

from topovet.screening.records import Job, Outcome


@dataclass(frozen=True, slots=True)
class Finished:
    """A job that has left the pool.

    Attributes
    ----------
    slug
        Of the job.
    outcome
        None where the worker was lost.
    lost
        How it was lost, in words; "" where it was not.
    for_good
        Whether there is no use in trying again: the case took longer than it may.
    """

    slug: str
    outcome: Outcome | None
    lost: str = ""
    for_good: bool = False


class Pool(Protocol):
    """Workers."""

    @property
    def slots(self) -> int:
        """Jobs that may run at once."""
        ...

    @property
    def memory_bytes(self) -> int | None:
        """Memory that the jobs share; None where nothing is known of it."""
        ...

    @property
    def about(self) -> str:
        """One line for the log."""
        ...

    def submit(self, job: Job) -> None:
        """Start a job; only called while fewer than `slots` are running."""
        ...

    def wait(self) -> list[Finished]:
        """Wait until at least one job has left, and return those that have."""
        ...

    def close(self) -> None:
        """Stop all that still runs; what its tasks have finished is kept."""
        ...
