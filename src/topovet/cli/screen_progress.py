"""Progress of a screen on stderr: a bar on a terminal, one line for each case elsewhere."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager

import click

from topovet.screening.journal import duration, outcome_text, step_text
from topovet.screening.records import Step
from topovet.screening.screen import Observer


@contextmanager
def screen_progress() -> Iterator[Observer]:
    """An observer for a screen."""
    if sys.stderr.isatty():
        with _bar() as observe:
            yield observe
    else:
        yield lambda step: click.echo(step_text(step), err=True)


@contextmanager
def _bar() -> Iterator[Observer]:
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeElapsedColumn

    from topovet.notation import one_line

    columns = (
        *(BarColumn(), MofNCompleteColumn(), TimeElapsedColumn()),
        TextColumn("{task.fields[pace]}", markup=False),
    )
    with Progress(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task("", total=None, pace="looking at the cases")

        def observe(step: Step) -> None:
            name, said = one_line(step.case.name), outcome_text(step.outcome)
            bar.console.print(f"{name}: {said}", markup=False, highlight=False)
            pace = "" if step.per_hour is None else f"{step.per_hour:.0f} cases/h"
            left = f", about {duration(step.left_s)} left" if step.left_s else ""
            bar.update(task, total=step.total, completed=step.done, pace=pace + left)

        yield observe
