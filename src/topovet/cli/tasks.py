"""`topovet tasks`: the task graph, with its state when a dossier exists."""

from __future__ import annotations

from pathlib import Path

import click

from topovet.pipeline.catalogue import case_tasks
from topovet.pipeline.dossier import default_folder, recorded_settings, start_run
from topovet.pipeline.graph import build_graph, task_order
from topovet.pipeline.task import Task


@click.command("tasks")
@click.argument("case", required=False, type=click.Path(), metavar="[CASE]")
@click.option(
    "--out",
    type=click.Path(file_okay=False, path_type=Path),
    metavar="DIR",
    help="Dossier folder of CASE [default: NAME-dossier here].",
)
def command(case: str | None, out: Path | None) -> None:
    """Print the task graph; with CASE, what its dossier holds for the files as they are."""
    if case is None:
        for task in task_order(build_graph(case_tasks())):
            click.echo(_line(task, None))
        return
    folder = default_folder(case) if out is None else out
    run = start_run(case, out=folder, settings=recorded_settings(folder))
    for task in task_order(run.graph):
        click.echo(_line(task, run.stored_state(task.name)))


def _line(task: Task, state: str | None) -> str:
    uses = ", ".join([*task.needs, *(f"{name}?" for name in task.wants)]) or "files only"
    shown = "" if state is None else f"{state:<15}"
    return f"{shown}{task.name:<24}{task.about}  [{uses}]"
