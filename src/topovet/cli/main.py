"""The command `topovet`: finds the command's module when it is used, maps errors to exit codes.

0 done, whatever the verdict; 1 the case could not be vetted; 2 wrong usage; 3 with --strict, when a
flag of severity error was raised.
"""

from __future__ import annotations

import importlib
import sys

import click

import topovet
from topovet.errors import TopovetError

COMMANDS = {
    "vet": "Vet one case and write its dossier.",
    "screen": "Vet all cases below a folder, or those of a list.",
    "shortlist": "Rank what has been vetted: table, page, JSON, CSV.",
    "inspect": "Audit the files of a case, without topology.",
    "deform": "Walk H from one case to another: closings, and what changes.",
    "tasks": "Show the task graph, with its state for a case.",
    "explain": "What a flag means, how it is tested, what to do.",
    "demo": "Write an invented screening campaign and run it.",
}
"""Commands in the order of `--help`; each lives in the module of its name."""


class LazyGroup(click.Group):
    """Loads a command's module only when that command is called."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, name: str) -> click.Command | None:
        if name not in COMMANDS:
            return None
        command: click.Command = importlib.import_module(f"topovet.cli.{name}").command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


@click.group(cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(topovet.__version__, prog_name="topovet")
def cli() -> None:
    """Vets the band topology of compounds from Wannier90 tight-binding output."""


def main() -> None:
    """Entry point; the one place where errors become messages and exit codes."""
    try:
        cli(standalone_mode=True, prog_name="topovet")
    except TopovetError as error:
        click.echo(f"topovet: {error}", err=True)
        sys.exit(1)
    except KeyboardInterrupt:
        click.echo("topovet: interrupted; finished tasks are kept.", err=True)
        sys.exit(130)
    except BrokenPipeError:
        sys.stderr.close()
        sys.exit(1)
