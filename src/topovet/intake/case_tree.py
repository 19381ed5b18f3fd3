"""Finding the case folders below a folder: any depth, links followed once, dossiers passed by."""

from __future__ import annotations

import os
from collections import deque
from dataclasses import dataclass
from pathlib import Path

from topovet.errors import InputError

HAMILTONIAN_ENDS = ("_hr.dat", "_tb.dat", "_hr.dat.gz", "_tb.dat.gz")

MADE_BY_US = frozenset({"verdict.json", "failure.json", "screen.log"})
"""Files that mark a folder as a dossier or a folder of dossiers: there are no cases below it."""


@dataclass(frozen=True, slots=True)
class CaseTree:
    """What lies below a folder.

    Attributes
    ----------
    folders
        Folders that hold a Hamiltonian, as paths that begin with the root, sorted.
    unreadable
        Folders that could not be listed, with the reason.
    """

    folders: tuple[Path, ...]
    unreadable: tuple[tuple[Path, str], ...]


def find_case_folders(root: Path, *, passed_by: Path | None = None) -> CaseTree:
    """Every folder at or below root that holds a Hamiltonian file.

    Links to folders are followed, but no folder is entered twice, so that loops end and a case is
    found once: under its own path where that lies below root, else under the first link to it.
    Hidden folders are not entered, nor are dossiers.

    Parameters
    ----------
    root
        Where to begin.
    passed_by
        A folder not to enter: where the dossiers go.

    Raises
    ------
    InputError
        The root is no folder or cannot be listed.
    """
    entered = {_identity(passed_by)} if passed_by is not None and passed_by.exists() else set()
    folders: list[Path] = []
    unreadable: list[tuple[Path, str]] = []
    # real folders first, whatever their depth: links only lead to what is not found without them
    real, links = deque([root]), deque[Path]()
    while real or links:
        folder = real.popleft() if real else links.popleft()
        try:
            identity = _identity(folder)
            if identity in entered:
                continue
            entered.add(identity)
            files, inner, linked = _listed(folder)
        except OSError as error:
            if folder == root:
                raise _not_a_root(root, error) from error
            unreadable.append((folder, error.strerror or str(error)))
            continue
        if any(name.endswith(HAMILTONIAN_ENDS) and not name.startswith(".") for name in files):
            folders.append(folder)
        if folder == root or not MADE_BY_US.intersection(files):
            real.extend(inner)
            links.extend(linked)
    return CaseTree(tuple(sorted(folders)), tuple(sorted(unreadable)))


def _identity(folder: Path) -> tuple[int, int]:
    status = folder.stat()
    return status.st_dev, status.st_ino


def _listed(folder: Path) -> tuple[list[str], list[Path], list[Path]]:
    """Names that are no folders, real folders, links to folders, each sorted."""
    files: list[str] = []
    inner: list[Path] = []
    linked: list[Path] = []
    with os.scandir(folder) as entries:
        for entry in sorted(entries, key=lambda e: e.name):
            if not _is_folder(entry):
                files.append(entry.name)
            elif not entry.name.startswith("."):
                (linked if entry.is_symlink() else inner).append(folder / entry.name)
    return files, inner, linked


def _is_folder(entry: os.DirEntry[str]) -> bool:
    try:
        return entry.is_dir()
    except OSError:  # a link to itself
        return False


def _not_a_root(root: Path, error: OSError) -> InputError:
    return InputError(
        root,
        found="no such folder"
        if isinstance(error, FileNotFoundError)
        else f"what cannot be listed ({error.strerror})",
        expected="a folder with cases below it, or a list of cases (NAME.csv)",
        todo="check the path",
    )
