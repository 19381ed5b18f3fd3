"""`topovet shortlist`: what has been vetted, ranked, as table, page, JSON and CSV."""

from __future__ import annotations

from pathlib import Path

import click

from topovet.cli.ranked_table import print_table
from topovet.report.shortlist.columns import csv_text
from topovet.report.shortlist.document import shortlist_json
from topovet.screening.index import Selection
from topovet.screening.merit_rules import default_text, read_rules
from topovet.screening.shortlist import INDEX, make_shortlist, write_shortlist
from topovet.screening.shortlist_reading import AGREEMENTS, CLASSES, GRADES, known_symbols
from topovet.verdict.advice import CODES

_FAILURES_TOLD = 20


class Element(click.ParamType):  # type: ignore[type-arg,unused-ignore]
    """A chemical symbol."""

    name = "element"

    def convert(
        self, value: object, param: click.Parameter | None, ctx: click.Context | None
    ) -> str:
        symbol = str(value).capitalize()
        if symbol not in known_symbols():
            self.fail(f"{value!r} is no chemical symbol such as Bi", param, ctx)
        return symbol


class FlagCode(click.ParamType):  # type: ignore[type-arg,unused-ignore]
    """The code of a flag."""

    name = "code"

    def convert(
        self, value: object, param: click.Parameter | None, ctx: click.Context | None
    ) -> str:
        if str(value) not in CODES:
            self.fail(f"{value!r} is no flag; topovet explain lists the codes", param, ctx)
        return str(value)


def _show_merit(ctx: click.Context, param: click.Parameter, value: bool) -> None:
    if value and not ctx.resilient_parsing:
        click.echo(default_text(), nl=False)
        ctx.exit()


@click.command("shortlist")
@click.argument("folder", type=click.Path(path_type=Path), metavar="DIR")
@click.option(
    "--out",
    type=click.Path(file_okay=False, path_type=Path),
    metavar="DIR",
    help="Where to write shortlist.html, .json, .csv and .sqlite [default: DIR].",
)
@click.option("--no-files", is_flag=True, help="Print only, write nothing.")
@click.option("--parquet", is_flag=True, help="Write shortlist.parquet too; needs pyarrow.")
@click.option("--json", "as_json", is_flag=True, help="Print the list as JSON on stdout.")
@click.option("--csv", "as_csv", is_flag=True, help="Print the list as CSV on stdout.")
@click.option("--limit", type=click.IntRange(min=1), help="Lines of the printed table at most.")
@click.option(
    "--merit",
    "merit_file",
    type=click.Path(path_type=Path),
    metavar="FILE",
    help="TOML with weights of your own.",
)
@click.option(
    "--show-merit",
    is_flag=True,
    is_eager=True,
    expose_value=False,
    callback=_show_merit,
    help="Print the default weights as TOML and stop.",
)
@click.option("--class", "classes", type=click.Choice(CLASSES), multiple=True, help="This class.")
@click.option("--grade", type=click.Choice(GRADES), help="This grade or better.")
@click.option("--agreement", "agreements", type=click.Choice(AGREEMENTS), multiple=True)
@click.option("--dimension", type=click.Choice(["2", "3"]), help="Periodic directions.")
@click.option(
    "--min-gap",
    "min_gap_ev",
    type=float,
    metavar="EV",
    help="Least indirect gap in eV (or direct, proved, if that is smaller).",
)
@click.option("--element", "elements", type=Element(), multiple=True, help="With this element.")
@click.option("--without-element", "without_elements", type=Element(), multiple=True)
@click.option("--flag", "flags", type=FlagCode(), multiple=True, help="With this flag.")
@click.option("--without-flag", "without_flags", type=FlagCode(), multiple=True)
@click.option("--name", "text", help="With this text in the name.")
def command(
    folder: Path,
    out: Path | None,
    no_files: bool,
    parquet: bool,
    as_json: bool,
    as_csv: bool,
    limit: int | None,
    merit_file: Path | None,
    classes: tuple[str, ...],
    grade: str | None,
    agreements: tuple[str, ...],
    dimension: str | None,
    min_gap_ev: float | None,
    elements: tuple[str, ...],
    without_elements: tuple[str, ...],
    flags: tuple[str, ...],
    without_flags: tuple[str, ...],
    text: str | None,
) -> None:
    """Rank the dossiers below DIR and write the shortlist: page, JSON, CSV, SQLite.

    Filters narrow everything that is printed and written but the SQLite index; ranks stay those
    of the whole list. Options that can be repeated: --class and --agreement take any of theirs,
    the others all of theirs.
    """
    _check_usage(as_json, as_csv, no_files, parquet, out)
    selection = Selection(
        classes=classes,
        grade=grade,
        agreements=agreements,
        dimension=None if dimension is None else int(dimension),
        min_gap_ev=min_gap_ev,
        elements=elements,
        without_elements=without_elements,
        flags=flags,
        without_flags=without_flags,
        text=text,
    )
    rules = None if merit_file is None else read_rules(merit_file)
    target = folder if out is None else out
    index_at = None if no_files else target / INDEX
    found = make_shortlist(folder, rules=rules, selection=selection, index_at=index_at)
    written = () if no_files else write_shortlist(found, folder, target, parquet=parquet)
    if as_json:
        click.echo(shortlist_json(found), nl=False)
    elif as_csv:
        click.echo(csv_text(found), nl=False)
    else:
        print_table(found, limit=limit)
    for failure in found.failures[:_FAILURES_TOLD]:
        click.echo(f"topovet: {failure.folder}: {failure.message}", err=True)
    untold = len(found.failures) - _FAILURES_TOLD
    if untold > 0:
        click.echo(f"topovet: {untold} more failures; the page lists them all", err=True)
    if written:
        click.echo(f"page: {written[0]}", err=as_json or as_csv)


def _check_usage(
    as_json: bool, as_csv: bool, no_files: bool, parquet: bool, out: Path | None
) -> None:
    if as_json and as_csv:
        raise click.UsageError("give --json or --csv, not both")
    if no_files and (parquet or out is not None):
        raise click.UsageError("--no-files leaves nothing for --out and --parquet")
