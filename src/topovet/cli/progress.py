"""Progress on stderr: a live line on a terminal, plain lines elsewhere."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager

import click

from topovet.pipeline.runner import Observer


@contextmanager
def progress(title: str, *, quiet: bool = False) -> Iterator[Observer]:
    """An observer for a run; shows nothing when quiet."""
    if quiet:
        yield lambda event, text: None
    elif sys.stderr.isatty():
        with _live(title) as observer:
            yield observer
    else:
        yield _plain(title)


@contextmanager
def _live(title: str) -> Iterator[Observer]:
    from rich.console import Console
    from rich.markup import escape

    console = Console(stderr=True)
    with console.status(escape(title)) as status:

        def observe(event: str, text: str) -> None:
            if event == "start":
                status.update(f"{escape(title)}: {escape(text)} …")
            elif event == "log" or ": failed" in text:
                console.print(text, markup=False, highlight=False)

        yield observe


def _plain(title: str) -> Observer:
    def observe(event: str, text: str) -> None:
        if event != "start":
            click.echo(f"{title}: {text}", err=True)

    return observe
