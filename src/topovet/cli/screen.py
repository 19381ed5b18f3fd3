"""`topovet screen`: many cases, each into a dossier of its own."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from topovet.cli.screen_progress import screen_progress
from topovet.screening.screen import Plan, screen
from topovet.screening.shards import Shard, parse_shard
from topovet.screening.stopping import Stopped, stop_signals
from topovet.screening.summary import summary_lines


class ShardType(click.ParamType):  # type: ignore[type-arg,unused-ignore]
    """I/N."""

    name = "I/N"

    def convert(
        self, value: object, param: click.Parameter | None, ctx: click.Context | None
    ) -> Shard:
        if isinstance(value, Shard):
            return value
        try:
            return parse_shard(str(value))
        except ValueError as error:
            self.fail(str(error), param, ctx)


@click.command("screen")
@click.argument("root", type=click.Path(path_type=Path), metavar="ROOT")
@click.option(
    "--out",
    type=click.Path(file_okay=False, path_type=Path),
    required=True,
    metavar="DIR",
    help="Folder for the dossiers, DIR/NAME for each case.",
)
@click.option(
    "--workers",
    type=click.IntRange(min=1),
    metavar="N",
    help="Processes on this machine [default: one to a processor].",
)
@click.option(
    "--dask",
    metavar="ADDRESS",
    help="Use the workers of a Dask scheduler instead: its address, or its scheduler file.",
)
@click.option(
    "--shard",
    type=ShardType(),
    metavar="I/N",
    help="Only every N-th case, beginning with the I-th: one job of an array of N.",
)
@click.option(
    "--time-limit",
    "minutes",
    type=click.FloatRange(min=0, min_open=True),
    metavar="MINUTES",
    help="Give up a case that takes longer; the others go on.",
)
@click.option("--fresh", is_flag=True, help="Compute everything anew.")
@click.option(
    "--effort",
    type=click.Choice(["quick", "standard", "thorough"]),
    default="standard",
    show_default=True,
    help="How finely the zone is sampled.",
)
def command(
    root: Path,
    out: Path,
    workers: int | None,
    dask: str | None,
    shard: Shard | None,
    minutes: float | None,
    fresh: bool,
    effort: str,
) -> None:
    """Vet every case below ROOT, or those of the list ROOT (a .csv file).

    A case that fails is recorded and stops no other. Cases whose files, options and program are
    what they were are left as they are; run the same command again to go on after any interruption.
    """
    if workers is not None and dask is not None:
        raise click.UsageError("give --workers or --dask, not both")
    plan = Plan(
        root,
        out,
        effort=effort,
        workers=workers,
        dask=dask,
        shard=shard,
        fresh=fresh,
        limit_s=None if minutes is None else 60 * minutes,
    )
    try:
        with stop_signals(), screen_progress() as observe:
            result = screen(plan, observe=observe)
    except Stopped as stopped:
        click.echo(
            f"topovet: stopped by {stopped}; finished cases and tasks are kept, run the same "
            "command again to go on.",
            err=True,
        )
        sys.exit(128 + stopped.signum)
    click.echo("\n".join(summary_lines(result)))
    if result.outcomes and all(outcome.status == "failed" for outcome in result.outcomes):
        click.echo("topovet: none of the cases could be vetted.", err=True)
        sys.exit(1)
