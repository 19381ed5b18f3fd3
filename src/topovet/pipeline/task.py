"""What a task is: a small function that declares what it reads, needs and when it applies."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any


class NotApplicable(Exception):  # noqa: N818  (a finding, not an error)
    """Raised by a task whose question does not arise for this case; the message says why."""


@dataclass(frozen=True, slots=True)
class Task:
    """One node of the graph.

    Attributes
    ----------
    name
        Unique, kebab-case.
    about
        What it finds out, for people, one short line.
    run
        Called with one keyword argument for each of `needs` and `wants` (dashes as underscores;
        None for a want that has no result) and with `context`, the runner's `Context`.
    needs
        Tasks without whose result this one cannot run.
    wants
        Tasks whose result is used where there is one.
    reads
        Roles of case files (attributes of `CaseFiles`) whose contents the result depends on.
    settings
        Names of the options the result depends on.
    version
        Raised whenever the same input would now give another result; old results are then ignored.
    stored
        Whether the result is kept on disk. Large intermediate results are kept in memory only, are
        made when something asks for them, and are dropped after the last use.
    essential
        Whether the case cannot be vetted without it: its error ends the run.
    """

    name: str
    about: str
    run: Callable[..., Any]
    needs: tuple[str, ...] = ()
    wants: tuple[str, ...] = ()
    reads: tuple[str, ...] = ()
    settings: tuple[str, ...] = ()
    version: int = 1
    stored: bool = True
    essential: bool = False


@dataclass(frozen=True, slots=True)
class TaskState:
    """How a task ended, and in how many seconds; of the original run where it was recalled."""

    name: str
    state: str
    reason: str = ""
    seconds: float | None = None
