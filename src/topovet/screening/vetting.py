"""One case of a screen, from the question whether anything is to be done to its last file."""

from __future__ import annotations

import contextlib
import errno
import os
import shutil
import time
import traceback
from dataclasses import replace
from pathlib import Path

from topovet.errors import InputError, TopovetError
from topovet.notation import one_line
from topovet.pipeline.dossier import Dossier, vet_case
from topovet.pipeline.store import StoreError
from topovet.screening.claims import claim, claimed_by_another
from topovet.screening.code_digest import code_digest
from topovet.screening.dossier_state import drop_state, now, recorded_outcome, write_state
from topovet.screening.failures import forget_failure, record_failure
from topovet.screening.records import Job, Outcome

NO_ROOM = (errno.ENOSPC, errno.EDQUOT, errno.EROFS)
"""Errors that the next case would meet too."""

OUT_OF_MEMORY = (
    "memory ran out while the case was being vetted; use a machine with more, or fewer workers."
)

LEFTOVER_S = 3600.0
"""A half-written file that is older than this belongs to no process any more."""


def vet_job(job: Job) -> Outcome:
    """Vet one case unless its dossier is up to date; whatever happens becomes an outcome.

    Raises
    ------
    KeyboardInterrupt, SystemExit
        The process is to end; what was finished is kept.
    """
    code = code_digest()
    if job.code not in ("", code):
        return Outcome(
            job.slug, "other-code", message="the worker has another version of topovet installed"
        )
    started = time.perf_counter()
    folder = Path(job.folder)
    if not job.fresh:
        known = recorded_outcome(job.slug, folder, job.path, settings=job.settings, code=code)
        if known is not None:
            return known
    if job.heed_claims and claimed_by_another(folder):
        return Outcome(job.slug, "claimed")
    with claim(folder):
        try:
            return _vet(job, folder, started)
        except StoreError as error:
            return _unwritable(job, folder, error, started)


def _vet(job: Job, folder: Path, started: float) -> Outcome:
    _sweep(folder)
    if job.fresh:
        drop_state(folder)
        shutil.rmtree(folder / "tasks", ignore_errors=True)
    looked_at = now()
    try:
        dossier = vet_case(job.path, out=folder, settings=job.settings)
    except StoreError:
        raise
    except InputError as error:
        outcome = _failed(job, started, str(error), error.file, error.line)
    except TopovetError as error:
        outcome = _failed(job, started, str(error))
    except MemoryError:
        outcome = _failed(job, started, OUT_OF_MEMORY)
    except Exception as error:
        _keep_traceback(folder)
        where = f"{folder.name}/log.txt says where"
        outcome = _failed(job, started, f"internal error: {error!r}; {where}.")
    else:
        outcome = _vetted(job, dossier, started)
        forget_failure(folder)
        write_state(
            folder,
            settings=job.settings,
            code=code_digest(),
            inputs=dossier.inputs,
            outcome=outcome,
            looked_at=looked_at,
        )
        return outcome
    record_failure(folder, name=job.name, path=job.path, outcome=outcome)
    return outcome


def _vetted(job: Job, dossier: Dossier, started: float) -> Outcome:
    verdict = dossier.verdict
    return Outcome(
        job.slug,
        "vetted",
        class_=verdict.class_,
        grade=verdict.confidence.grade,
        flags=tuple((flag.code, flag.severity) for flag in verdict.flags),
        seconds=time.perf_counter() - started,
        task_seconds=sum(verdict.provenance.task_seconds.values()),
    )


def _failed(
    job: Job, started: float, message: str, file: str | None = None, line: int | None = None
) -> Outcome:
    return Outcome(
        job.slug,
        "failed",
        seconds=time.perf_counter() - started,
        message=one_line(message),
        file=job.path if file is None else file,
        line=line,
    )


def _unwritable(job: Job, folder: Path, error: StoreError, started: float) -> Outcome:
    """A dossier that cannot be written: the disk's fault, which stops all, or this folder's."""
    outcome = _failed(job, started, str(error), str(folder))
    cause = error.__cause__
    if isinstance(cause, OSError) and cause.errno in NO_ROOM:
        return replace(outcome, status="no-room")
    with contextlib.suppress(StoreError):
        record_failure(folder, name=job.name, path=job.path, outcome=outcome)
    return outcome


def _keep_traceback(folder: Path) -> None:
    with contextlib.suppress(OSError), (folder / "log.txt").open("a", encoding="utf-8") as log:
        log.write(traceback.format_exc())


def _sweep(folder: Path) -> None:
    """Remove what processes that were killed left half-written, once it is certainly abandoned."""
    for place in (folder, folder / "tasks", folder / "figures"):
        with contextlib.suppress(OSError), os.scandir(place) as entries:
            for entry in entries:
                if entry.name.startswith(".") and _is_abandoned(entry):
                    os.unlink(entry.path)


def _is_abandoned(entry: os.DirEntry[str]) -> bool:
    is_part = any(f"{end}." in entry.name for end in (".json", ".npz", ".svg", ".html"))
    return is_part and time.time() - entry.stat(follow_symlinks=False).st_mtime > LEFTOVER_S
