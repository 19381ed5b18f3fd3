"""`topovet deform`: from one case to another, where the gap closes and what changes."""

from __future__ import annotations

from pathlib import Path

import click

from topovet.cli.progress import progress
from topovet.pipeline.deform import deform_cases
from topovet.report.deformation.text import deformation_lines


@click.command("deform")
@click.argument("case_a", type=click.Path(), metavar="CASE_A")
@click.argument("case_b", type=click.Path(), metavar="CASE_B")
@click.option(
    "--out",
    type=click.Path(file_okay=False, path_type=Path),
    metavar="DIR",
    help="Folder of the results [default: A-to-B-deform here].",
)
@click.option(
    "--filling", type=click.IntRange(min=1), help="Occupied bands of both cases, spin counted."
)
@click.option(
    "--effort",
    type=click.Choice(["quick", "standard", "thorough"]),
    default="standard",
    show_default=True,
    help="How near to a closing the gap is proved; quick proves nothing.",
)
@click.option(
    "--as-is",
    is_flag=True,
    help="Make only inversion and time reversal exact, not all operations that the bands have.",
)
@click.option("--json", "as_json", is_flag=True, help="Print deform.json on stdout.")
def command(
    case_a: str,
    case_b: str,
    out: Path | None,
    filling: int | None,
    effort: str,
    as_is: bool,
    as_json: bool,
) -> None:
    """Walk H from CASE_A to CASE_B: find where the gap closes and what changes."""
    folder = _default_folder(case_a, case_b) if out is None else out
    with progress("deform") as observe:
        made = deform_cases(
            case_a,
            case_b,
            out=folder,
            filling=filling,
            effort=effort,
            average=not as_is,
            observe=observe,
        )
    if as_json:
        click.echo(made.json, nl=False)
    else:
        click.echo(deformation_lines(made.material))
        click.echo(f"page: {folder / 'deform.html'}")


def _default_folder(case_a: str, case_b: str) -> Path:
    names = [Path(case).name.removesuffix("_hr.dat") for case in (case_a, case_b)]
    return Path(f"{names[0]}-to-{names[1]}-deform")
