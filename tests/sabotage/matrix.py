"""The confusion matrix fault x first flag over the whole sabotage suite, written to MATRIX.md."""

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

QUIET = "no flag"
REFUSED = "refused"


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
    flagged = [entry for entry in entries if entry.named not in (QUIET, REFUSED)]
    right = sum(entry.right for entry in flagged)
    wrong = [entry for entry in entries if entry.wrong]
    parts = [
        "# Sabotage: what was done to a case, and what was named first",
        "Made by `bash workflows/sabotage`. Clean cases, models of the literature and "
        "first-principles ones, are spoiled in one way at a time, in sizes from harmless to fatal. "
        "The flag that counts is the first of severity warning or error that the clean case does "
        "not have.",
        f"- trials: {len(entries)}, of {len({e.case for e in entries})} cases and "
        f"{len({e.fault for e in entries})} faults\n"
        f"- silently wrong verdicts: {len(wrong)}\n"
        f"- flagged: {len(flagged)}; right cause first: {right} "
        f"({100 * right / max(1, len(flagged)):.1f} %)",
        "## Cause against first flag",
        _matrix(entries),
        "## Fault by fault",
        "Flagged right and flagged otherwise count trials with a flag; a trial without one kept "
        "the right answer, or is undetermined.",
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
        tally = Counter(
            entry.named if entry.named in (QUIET, REFUSED) else str(entry.right) for entry in mine
        )
        counts = [str(tally[key] or "") for key in ("True", "False", QUIET, REFUSED)]
        rows.append([fault.code, fault.name, _sizes(fault), str(len(mine)), *counts])
    head = ["cause", "fault", "sizes", "trials", "flagged right", "otherwise", QUIET, REFUSED]
    return _table(head, rows)


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
    """Write the page; the exit code is 1 if any verdict was silently wrong."""
    entries = run_all()
    TARGET.write_text(document(entries), encoding="utf-8")
    print("\n".join(document(entries).splitlines()[4:7]))
    return 1 if any(entry.wrong for entry in entries) else 0


if __name__ == "__main__":
    sys.exit(main())
