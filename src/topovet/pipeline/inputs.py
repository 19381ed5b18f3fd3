"""The files of a case with their hashes: what a result depends on and what provenance names."""

from __future__ import annotations

import os
from collections.abc import Iterator
from dataclasses import dataclass, fields, replace
from pathlib import Path

from topovet.errors import InputError
from topovet.intake.companion import find_companion
from topovet.intake.discovery import find_case, sha256_of
from topovet.intake.records import CaseFiles

NOT_FILES = ("folder", "seedname", "spinless")

OF_COMPANION = ("hr", "tb", "win", "wsvec", "centres", "structure", "settings")
"""Roles of the files of a spinless companion that are read."""

SPINLESS = "spinless "
"""Stands before the role of such a file."""


@dataclass(frozen=True, slots=True)
class FileStamp:
    """What a file system says of a file without its being read.

    Attributes
    ----------
    bytes
        Its size.
    mtime_ns, ctime_ns
        When its content, and when anything about it, was changed last (ns since 1970).
    inode
        Its number: another file of the same name has another one.
    """

    bytes: int
    mtime_ns: int
    ctime_ns: int
    inode: int


@dataclass(frozen=True, slots=True)
class CaseInput:
    """One file: its role in `CaseFiles`, name, SHA-256, size, and its stamp before hashing."""

    role: str
    file: str
    sha256: str
    bytes: int
    stamp: FileStamp | None = None


def case_paths(files: CaseFiles) -> Iterator[tuple[str, str]]:
    """Role and path of every file that is there, as `CaseFiles` has them, the companion last."""
    for role in (f.name for f in fields(files) if f.name not in NOT_FILES):
        path = getattr(files, role)
        if path is not None:
            yield role, str(path)
    for role in OF_COMPANION if files.spinless is not None else ():
        path = getattr(files.spinless, role)
        if path is not None:
            yield SPINLESS + role, str(path)


def find_files(case: str | Path, spinless: str | Path | None = None) -> CaseFiles:
    """The files of a case and of its spinless companion.

    Parameters
    ----------
    case
        Case folder, or its Hamiltonian file.
    spinless
        Path of the companion; None for the one that `case.toml` names, if it does.

    Raises
    ------
    InputError
        As `find_case`, for either; or `case.toml` cannot be read.
    """
    files = find_case(case)
    return replace(files, spinless=find_companion(files, spinless))


def shown_name(role: str, path: str | Path) -> str:
    """Name of a file for people: with its folder where it is the companion's."""
    path = Path(path)
    return f"{path.parent.name}/{path.name}" if role.startswith(SPINLESS) else path.name


def stamp_of(path: str | Path) -> FileStamp | None:
    """The stamp of a file; None where there is none or it cannot be asked."""
    try:
        status = os.stat(path)
    except OSError:
        return None
    return FileStamp(status.st_size, status.st_mtime_ns, status.st_ctime_ns, status.st_ino)


def hash_inputs(files: CaseFiles) -> tuple[CaseInput, ...]:
    """Hash every file of a case that is there; raises InputError where one cannot be read."""
    found = []
    for role, path in case_paths(files):
        stamp = stamp_of(path)
        digest, size = sha256_of(path)
        found.append(CaseInput(role, shown_name(role, path), digest, size, stamp))
    return tuple(found)


def check_unchanged(files: CaseFiles, inputs: tuple[CaseInput, ...]) -> None:
    """Refuse a conclusion on files that were written to while they were read.

    Raises
    ------
    InputError
        A file is not the one that was hashed: what was read from it may be of either.
    """
    paths = dict(case_paths(files))
    for entry in inputs:
        if entry.stamp is None:
            continue
        path = paths[entry.role]
        if stamp_of(path) != entry.stamp:
            raise InputError(
                path,
                found="a file that was changed while the case was being vetted",
                expected="files that stay as they are",
                todo="wait until they are complete, then vet again",
            )
