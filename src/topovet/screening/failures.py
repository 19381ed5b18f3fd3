"""The error of a case that could not be vetted, kept in its dossier folder until it can be."""

from __future__ import annotations

import json
from datetime import datetime, timezone
from pathlib import Path

from topovet.notation import one_line
from topovet.pipeline.store import write_atomically
from topovet.screening.dossier_state import drop_state
from topovet.screening.records import Outcome

FAILURE_FILE = "failure.json"
SCHEMA = "topovet.failure/1"

_RESULTS = ("verdict.json", "report.html")


def record_failure(folder: Path, *, name: str, path: str, outcome: Outcome) -> None:
    """Write `failure.json`, then take away what an earlier success left: the two never agree.

    Raises
    ------
    StoreError
        It cannot be written.
    """
    document = {
        "schema": SCHEMA,
        "case": {"name": _text(name), "path": _text(path)},
        "error": {
            "file": _text(outcome.file),
            "line": outcome.line,
            "message": one_line(outcome.message),
        },
        "when": datetime.now(timezone.utc).strftime("%Y-%m-%dT%H:%M:%SZ"),
    }
    text = json.dumps(document, indent=1, ensure_ascii=False) + "\n"
    write_atomically(folder / FAILURE_FILE, text.encode())
    drop_state(folder)
    for result in _RESULTS:
        (folder / result).unlink(missing_ok=True)


def forget_failure(folder: Path) -> None:
    """The case has been vetted."""
    (folder / FAILURE_FILE).unlink(missing_ok=True)


def _text(value: str) -> str:
    """File names may hold undecodable bytes (surrogates), which UTF-8 cannot carry."""
    return value.encode("utf-8", "backslashreplace").decode("utf-8")
