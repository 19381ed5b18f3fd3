"""`topovet demo`: an invented campaign, written, screened and ranked."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from topovet.cli.screen_progress import screen_progress
from topovet.demo.campaign import ANSWERS, COMPOUNDS, DOSSIERS, write_campaign
from topovet.screening.screen import Plan, screen
from topovet.screening.shortlist import HTML, INDEX, make_shortlist, write_shortlist
from topovet.screening.stopping import Stopped, stop_signals
from topovet.screening.summary import summary_lines


@click.command("demo")
@click.argument("folder", type=click.Path(path_type=Path), metavar="DIR")
@click.option(
    "--workers",
    type=click.IntRange(min=1),
    metavar="N",
    help="Processes on this machine [default: one to a processor].",
)
@click.option(
    "--force",
    is_flag=True,
    help="Write into a folder that holds files; those of the demo are replaced.",
)
def command(folder: Path, workers: int | None, force: bool) -> None:
    """Write an invented screening campaign to DIR, vet all of it and rank the results.

    No compound in it exists. answers.csv says what each is made of and what is wrong with it.
    """
    cases, dossiers = write_campaign(folder, force=force), folder / DOSSIERS
    click.echo(f"{len(COMPOUNDS)} invented cases in {cases}", err=True)
    try:
        with stop_signals(), screen_progress() as observe:
            result = screen(Plan(cases, dossiers, workers=workers), observe=observe)
    except Stopped as stopped:
        click.echo(
            f"topovet: stopped by {stopped}; go on with topovet screen {cases} --out {dossiers}",
            err=True,
        )
        sys.exit(128 + stopped.signum)
    shortlist = make_shortlist(dossiers, index_at=dossiers / INDEX)
    write_shortlist(shortlist, dossiers, dossiers)
    click.echo("\n".join(summary_lines(result)))
    click.echo(f"shortlist: {dossiers / HTML}")
    click.echo(f"right answers: {folder / ANSWERS}")
