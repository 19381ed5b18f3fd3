"""The files of a case with their hashes: what a result depends on and what provenance names."""

from __future__ import annotations

from dataclasses import dataclass, fields
from pathlib import Path

from topovet.intake.discovery import sha256_of
from topovet.intake.records import CaseFiles

NOT_FILES = ("folder", "seedname")


@dataclass(frozen=True, slots=True)
class CaseInput:
    """One file: its role in `CaseFiles`, its name, SHA-256 and size."""

    role: str
    file: str
    sha256: str
    bytes: int


def hash_inputs(files: CaseFiles) -> tuple[CaseInput, ...]:
    """Hash every file of a case that is there; raises InputError where one cannot be read."""
    found = []
    for role in (f.name for f in fields(files) if f.name not in NOT_FILES):
        path = getattr(files, role)
        if path is not None:
            digest, size = sha256_of(path)
            found.append(CaseInput(role, Path(path).name, digest, size))
    return tuple(found)
