"""The log of a screen: one line for each case, with its time; a log never stops a screen."""

from __future__ import annotations

from datetime import datetime, timezone
from pathlib import Path

from topovet.notation import one_line, printable
from topovet.screening.records import Outcome, Step
from topovet.screening.shards import Shard


def log_path(out: Path, shard: Shard | None) -> Path:
    """A log of its own for each shard: appending from several machines would mix up lines."""
    return out / ("screen.log" if shard is None else f"screen-{shard.index}of{shard.count}.log")


class Journal:
    """Appends lines to a file.

    Attributes
    ----------
    broken
        Why lines could not be written; "" where they could.
    """

    def __init__(self, path: Path) -> None:
        self._path = path
        self.broken = ""

    def __call__(self, text: str) -> None:
        when = datetime.now(timezone.utc).strftime("%Y-%m-%dT%H:%M:%SZ")
        try:
            self._path.parent.mkdir(parents=True, exist_ok=True)
            with self._path.open("a", encoding="utf-8", errors="backslashreplace") as log:
                log.write(f"{when} {one_line(text)}\n")
        except OSError as error:
            self.broken = f"{self._path}: cannot be written ({error.strerror})"


def outcome_text(outcome: Outcome) -> str:
    """What became of a case, in one line."""
    if outcome.status == "failed":
        return f"failed: {printable(outcome.message)}"
    errors = sum(severity == "error" for _, severity in outcome.flags)
    grade = f"{outcome.class_}, grade {outcome.grade}"
    count = len(outcome.flags)
    flags = f", {counted(count, 'flag')} ({counted(errors, 'error')})" if count else ""
    took = f", {outcome.seconds:.1f} s" if outcome.status == "vetted" else ", unchanged"
    return f"{grade}{flags}{took}"


def counted(number: int, thing: str) -> str:
    """A number with its noun, in the singular for one."""
    return f"{number} {thing}" if number == 1 else f"{number} {thing}s"


def step_text(step: Step) -> str:
    """A case that has ended, how far the screen is, and what is left."""
    pace = "" if step.per_hour is None else f"; {step.per_hour:.0f} cases/h"
    left = "" if not step.left_s else f", about {duration(step.left_s)} left"
    name = one_line(step.case.name)
    return f"[{step.done}/{step.total}] {name}: {outcome_text(step.outcome)}{pace}{left}"


def duration(seconds: float) -> str:
    """A time to two digits or so: "40 s", "3 min", "2 h 10 min"."""
    if seconds < 90:
        return f"{seconds:.0f} s"
    minutes = round(seconds / 60)
    return f"{minutes} min" if minutes < 90 else f"{minutes // 60} h {minutes % 60:02d} min"
