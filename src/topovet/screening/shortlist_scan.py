"""Finds the dossiers below a folder and reads each; what cannot be read becomes a failure."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

from topovet.errors import InputError
from topovet.report.shortlist.records import Candidate, Failure
from topovet.screening.shortlist_reading import (
    folder_text,
    read_candidate,
    read_failure,
    unreadable,
)

INSIDE_A_DOSSIER = frozenset({"tasks", "figures", "symmetrised"})
"""Folders of a dossier that hold no case of their own. The symmetrised twin of a case is another
reading of the same Hamiltonian, not another candidate."""

VERDICT, FAILURE = "verdict.json", "failure.json"


@dataclass(frozen=True, slots=True)
class Scan:
    """What lies below a folder, in order of the folders' names."""

    candidates: tuple[Candidate, ...]
    failures: tuple[Failure, ...]


def scan_dossiers(root: Path) -> Scan:
    """Read every dossier below a folder, at any depth; the folder itself may be one.

    Symbolic links to folders are not followed, hidden folders are not entered.

    Raises
    ------
    InputError
        `root` is no folder, or holds no dossier at all.
    """
    if not root.is_dir():
        raise InputError(
            root,
            found="no folder" if not root.exists() else "a file",
            expected="a folder of dossiers",
            todo="name the folder that topovet screen or topovet vet wrote to",
        )
    closed: list[Failure] = []
    found = [
        _read(folder, names, root)
        for folder, names in _dossiers(root, lambda error: closed.append(_closed(error, root)))
    ]
    if not found and not closed:
        raise InputError(
            root,
            found=f"no {VERDICT} and no {FAILURE} at any depth",
            expected="a folder of dossiers",
            todo="vet the cases first: topovet screen ROOT --out DIR",
        )
    return Scan(
        tuple(entry for entry in found if isinstance(entry, Candidate)),
        (*(entry for entry in found if isinstance(entry, Failure)), *closed),
    )


def _dossiers(root: Path, on_error: Callable[[OSError], None]) -> Iterator[tuple[Path, set[str]]]:
    """Folders with a verdict or a recorded failure, and which of the two they have."""
    for place, folders, files in os.walk(root, onerror=on_error):
        names = {VERDICT, FAILURE}.intersection(files)
        skipped = INSIDE_A_DOSSIER if names else frozenset()
        folders[:] = sorted(f for f in folders if f not in skipped and not f.startswith("."))
        if names:
            yield Path(place), names


def _closed(error: OSError, root: Path) -> Failure:
    """A folder that cannot be looked into: what it may hold is not known."""
    folder = Path(os.fsdecode(error.filename))
    name = folder_text(folder, root)
    why = f"the folder cannot be looked into ({error.strerror}); make it readable"
    return Failure("unreadable", name, name, why, "", None, "")


def _read(folder: Path, names: set[str], root: Path) -> Candidate | Failure:
    """A recorded failure wins over a verdict beside it, which an earlier run left."""
    try:
        if FAILURE in names:
            return read_failure(folder, root)
        return read_candidate(folder, root)
    except InputError as error:
        return unreadable(folder, root, error)
