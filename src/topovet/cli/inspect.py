"""`topovet inspect`: what was read, what is wrong with it, no topology."""

from __future__ import annotations

import json
from pathlib import Path

import click

from topovet.cli.options import case_argument
from topovet.cli.progress import progress
from topovet.pipeline.inspection import inspect_case, inspection_lines


@click.command("inspect")
@case_argument
@click.option("--json", "as_json", is_flag=True, help="Print the findings as JSON on stdout.")
def command(case: str, as_json: bool) -> None:
    """Audit the files of CASE: Hermiticity, R vectors, shifts, symmetry residuals."""
    with progress(Path(case).name) as observe:
        inspection = inspect_case(case, observe=observe)
    if as_json:
        click.echo(json.dumps(inspection.as_dict(), indent=1, ensure_ascii=False))
    else:
        click.echo("\n".join(inspection_lines(inspection)))
