"""The confusion matrix fault x first cause over the whole sabotage suite, written to MATRIX.md."""

from __future__ import annotations

import sys
from collections import Counter
from collections.abc import Iterable, Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from pathlib import Path

from clean_cases import CLEAN_CASES
from examine import examine, top_cause
from fault import Fault
from faults import FAULTS, trials

TARGET = Path(__file__).with_name("MATRIX.md")
WORKERS = 2

AIM = 0.95
"""Share of the trials in which something is flagged that are to name the right cause first."""

QUIET = "nothing"
REFUSED = "refused"
SUMMARY = ("- trials:", "- silently wrong", "- flagged:")


@dataclass(frozen=True, slots=True)
class Entry:
    """One trial: names, what stood on top, whether that is right, what was silently wrong."""

    case: str
    fault: str
    size: float
    named: str
    right: bool
    wrong: str


def run_trial(case_name: str, fault_name: str, size: float) -> Entry:
    case = CLEAN_CASES[case_name]
    fault = next(fault for fault in FAULTS if fault.name == fault_name)
    outcome = examine(case, fault, size)
    named = REFUSED if outcome.refused else top_cause(case, outcome) or QUIET
    return Entry(case_name, fault_name, size, named, named in fault.expected, outcome.wrong)


def run_all() -> list[Entry]:
    """All trials, in the order of `trials`."""
    tasks = [(case.name, fault.name, size) for case, fault, size in trials()]
    entries: list[Entry] = []
    with ProcessPoolExecutor(WORKERS) as pool:
        for entry in pool.map(run_trial, *zip(*tasks, strict=True), chunksize=8):
            entries.append(entry)
            if len(entries) % 100 == 0:
                print(f"{len(entries)} of {len(tasks)} trials", file=sys.stderr, flush=True)
    return entries


def document(entries: Sequence[Entry]) -> str:
    """The page: share, matrix, faults one by one, confusions, silent wrong verdicts."""
    flagged = _flagged(entries)
    right = sum(entry.right for entry in flagged)
    wrong = [entry for entry in entries if entry.wrong]
    parts = [
        "# Sabotage: what was done to a case, and what was named first",
        "Made by `bash workflows/sabotage`. Clean cases, models of the literature and "
        "first-principles ones, are spoiled in one way at a time, in sizes from harmless to fatal. "
        "Named is the first cause of the diagnosis that is confirmed or possible, follows from no "
        "other and is not there in the clean case; where the diagnosis has none, the first new "
        "flag of severity warning or error.",
        f"- trials: {len(entries)}, of {len({e.case for e in entries})} cases and "
        f"{len({e.fault for e in entries})} faults\n"
        f"- silently wrong verdicts: {len(wrong)}\n"
        f"- flagged: {len(flagged)}; right cause first: {right} "
        f"({100 * _share_right(entries):.1f} %)",
        "## What was wrong, against what was named first",
        _matrix(entries),
        "## Fault by fault",
        "A trial in which nothing is named kept the right answer, or is undetermined.",
        _by_fault(entries),
        "## Where another cause is named first",
        _list(entry for entry in flagged if not entry.right),
        "## Silently wrong",
        _list(wrong),
    ]
    return "\n\n".join(parts) + "\n"


def _matrix(entries: Sequence[Entry]) -> str:
    code_of = {fault.name: fault.code for fault in FAULTS}
    counts = Counter((code_of[entry.fault], entry.named) for entry in entries)
    codes = list(dict.fromkeys(code_of.values()))
    named = [*sorted({n for _, n in counts} - {QUIET, REFUSED}), QUIET, REFUSED]
    rows = [[code, *(str(counts[code, n] or "") for n in named)] for code in codes]
    return _table(["cause", *named], rows)


def _by_fault(entries: Sequence[Entry]) -> str:
    rows = []
    for fault in FAULTS:
        mine = [entry for entry in entries if entry.fault == fault.name]
        tally = Counter(entry.named for entry in mine)
        right = sorted((name for name in tally if name in fault.expected), key=lambda n: -tally[n])
        other = sorted(set(tally) - fault.expected - {QUIET, REFUSED})
        counts = [str(tally[key] or "") for key in (QUIET, REFUSED)]
        rows.append(
            [
                fault.code,
                fault.name,
                _sizes(fault),
                str(len(mine)),
                _tallied(tally, right),
                _tallied(tally, other),
                *counts,
            ]
        )
    head = ["cause", "fault", "sizes", "trials", "named rightly", "named otherwise"]
    return _table([*head, QUIET, REFUSED], rows)


def _tallied(tally: Counter[str], names: Sequence[str]) -> str:
    return ", ".join(f"{name} {tally[name]}" for name in names)


def _sizes(fault: Fault) -> str:
    numbers = ", ".join(f"{size:g}" for size in fault.sizes)
    return f"{numbers} {fault.unit}".strip()


def _list(entries: Iterable[Entry]) -> str:
    lines = [
        f"- {entry.case}, {entry.fault} {entry.size:g}: {entry.wrong or entry.named}"
        for entry in entries
    ]
    return "\n".join(lines) or "None."


def _table(head: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    lines = [head, ["---"] * len(head), *rows]
    return "\n".join("| " + " | ".join(line) + " |" for line in lines)


def main() -> int:
    """Write the page; the exit code is 1 if a verdict was silently wrong or the aim is missed."""
    entries = run_all()
    page = document(entries)
    TARGET.write_text(page, encoding="utf-8")
    print("\n".join(line for line in page.splitlines() if line.startswith(SUMMARY)))
    wrong = any(entry.wrong for entry in entries)
    return 1 if wrong or _share_right(entries) < AIM else 0


def _flagged(entries: Sequence[Entry]) -> list[Entry]:
    return [entry for entry in entries if entry.named not in (QUIET, REFUSED)]


def _share_right(entries: Sequence[Entry]) -> float:
    flagged = _flagged(entries)
    return sum(entry.right for entry in flagged) / max(1, len(flagged))


if __name__ == "__main__":
    sys.exit(main())
