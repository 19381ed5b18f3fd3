"""The end of a screen in a few lines: classes, grades, flags, failures, time."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Iterator

from topovet.notation import one_line
from topovet.screening.journal import duration
from topovet.screening.records import ScreenResult

MOST_FAILURES = 20
"""Failures that are listed; the others are in their dossier folders."""


def summary_lines(result: ScreenResult) -> list[str]:
    """What came out of a screen, for people."""
    by_status = Counter(outcome.status for outcome in result.outcomes)
    lines = [
        f"{len(result.outcomes)} cases: {by_status['vetted']} vetted, "
        f"{by_status['unchanged']} unchanged, {by_status['failed']} failed; "
        f"{duration(result.seconds)}"
    ]
    verdicts = [outcome for outcome in result.outcomes if outcome.class_]
    lines += _counted("classes", (outcome.class_ for outcome in verdicts))
    lines += _counted("grades", (outcome.grade for outcome in verdicts), by_name=True)
    lines += _counted("flags", (code for outcome in verdicts for code, _ in outcome.flags))
    lines += _failures(result)
    lines += [f"note: {note}" for note in result.notes]
    lines.append(f"dossiers: {result.folder}")
    return lines


def _counted(title: str, words: Iterable[str], *, by_name: bool = False) -> Iterator[str]:
    counts = Counter(words)
    if counts:
        ordered = sorted(counts, key=lambda w: (w,) if by_name else (-counts[w], w))
        yield f"  {title:<8} " + ", ".join(f"{word} {counts[word]}" for word in ordered)


def _failures(result: ScreenResult) -> Iterator[str]:
    failed = [outcome for outcome in result.outcomes if outcome.status == "failed"]
    if failed:
        yield "  failures (each kept as failure.json in its dossier folder)"
    for outcome in failed[:MOST_FAILURES]:
        name = one_line(result.names.get(outcome.slug, outcome.slug))
        yield f"    {name}: {one_line(outcome.message)}"
    if len(failed) > MOST_FAILURES:
        yield f"    and {len(failed) - MOST_FAILURES} more"
