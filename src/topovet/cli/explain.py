"""`topovet explain`: the advice page of a flag."""

from __future__ import annotations

import click

from topovet.verdict.advice import CODES, advice_page


@click.command("explain")
@click.argument("code", required=False)
def command(code: str | None) -> None:
    """Explain the flag CODE; without one, list all codes."""
    click.echo("\n".join(CODES) if code is None else advice_page(code).rstrip())
