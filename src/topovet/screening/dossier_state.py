"""Whether a dossier is up to date: a small file beside the verdict says what it was made from."""

from __future__ import annotations

import hashlib
import json
import time
from collections.abc import Mapping
from dataclasses import asdict
from pathlib import Path
from typing import Any

from topovet.errors import InputError
from topovet.intake.discovery import sha256_of
from topovet.pipeline.inputs import (
    CaseInput,
    FileStamp,
    case_paths,
    find_files,
    shown_name,
    stamp_of,
)
from topovet.pipeline.store import write_atomically
from topovet.screening.records import Outcome

STATE_FILE = "screened.json"
SCHEMA = "topovet.screened/1"

SETTLED_S = 3.0
"""A file that was changed less than this before it was looked at may change again without its time
moving on (clocks of file systems are coarse); it is told by its hash, not by its stamp."""


def write_state(
    folder: Path,
    *,
    settings: Mapping[str, Any],
    code: str,
    inputs: tuple[CaseInput, ...],
    outcome: Outcome,
    looked_at: float,
) -> None:
    """Record what a dossier was made from; the last file that is written of it.

    Parameters
    ----------
    folder
        Dossier folder, with its verdict.
    settings, code, inputs
        What the verdict depends on.
    outcome
        Its conclusion, for the summary of a later screen.
    looked_at
        Seconds since 1970 before the inputs were hashed.
    """
    document = {
        "schema": SCHEMA,
        "code": code,
        "settings": dict(settings),
        "looked_at": looked_at,
        "inputs": [asdict(entry) for entry in inputs],
        "verdict_sha256": _sha256(folder / "verdict.json"),
        "report_bytes": (folder / "report.html").stat().st_size,
        "class": outcome.class_,
        "grade": outcome.grade,
        "flags": [list(flag) for flag in outcome.flags],
    }
    text = json.dumps(document, indent=1) + "\n"
    write_atomically(folder / STATE_FILE, text.encode())


def drop_state(folder: Path) -> None:
    """The dossier is no longer known to be up to date."""
    (folder / STATE_FILE).unlink(missing_ok=True)


def recorded_outcome(
    slug: str, folder: Path, case: str, *, settings: Mapping[str, Any], code: str
) -> Outcome | None:
    """The conclusion of an up-to-date dossier, or None where it is to be made (again).

    Files are compared by their stamps, and by their hashes where a stamp differs or is too young
    to be trusted. Anything unexpected in the record means "not up to date".
    """
    try:
        state = json.loads((folder / STATE_FILE).read_bytes())
        same = (
            state["schema"] == SCHEMA
            and state["code"] == code
            and state["settings"] == dict(settings)
            and not (folder / "failure.json").exists()
            and state["verdict_sha256"] == _sha256(folder / "verdict.json")
            and state["report_bytes"] == (folder / "report.html").stat().st_size
            and _same_inputs(state["inputs"], case, settings, float(state["looked_at"]))
        )
        flags = tuple((str(code), str(severity)) for code, severity in state["flags"])
        recalled = Outcome(slug, "unchanged", str(state["class"]), str(state["grade"]), flags)
    except (OSError, ValueError, KeyError, TypeError, InputError):
        return None
    return recalled if same else None


def _same_inputs(
    recorded: list[dict[str, Any]], case: str, settings: Mapping[str, Any], looked_at: float
) -> bool:
    present = dict(case_paths(find_files(case, settings.get("spinless"))))
    if [entry["role"] for entry in recorded] != list(present):
        return False
    return all(_same_file(present[entry["role"]], entry, looked_at) for entry in recorded)


def _same_file(path: str, entry: dict[str, Any], looked_at: float) -> bool:
    if shown_name(entry["role"], path) != entry["file"]:
        return False
    stamp = stamp_of(path)
    if stamp is None or stamp.bytes != entry["bytes"]:
        return False
    if entry["stamp"] is not None and stamp == FileStamp(**entry["stamp"]):
        youngest = max(stamp.mtime_ns, stamp.ctime_ns) / 1e9
        if youngest < looked_at - SETTLED_S:
            return True
    return sha256_of(path)[0] == str(entry["sha256"])


def _sha256(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


def now() -> float:
    """Seconds since 1970."""
    return time.time()
