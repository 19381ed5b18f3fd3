"""What a screen hands around: the cases, what became of each, how far it is."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from pathlib import Path
from typing import Any, Literal

Status = Literal["vetted", "unchanged", "failed", "claimed", "no-room", "other-code"]
"""vetted now; unchanged since it was vetted; failed, recorded; claimed by another process at the
moment; the disk does not take results; the worker runs other code than the process that asked."""


@dataclass(frozen=True, slots=True)
class ScreenCase:
    """One case of a screen.

    Attributes
    ----------
    slug
        Name of its dossier folder.
    name
        As the user would call it: from the list, or its path below the root.
    path
        Case folder or Hamiltonian file, absolute.
    settings
        Options of `topovet.pipeline.dossier.vet_case` that are not the default ones.
    size_bytes
        Size of its Hamiltonian file, 0 where unknown: a measure of the work.
    memory_bytes
        What vetting it is estimated to take.
    """

    slug: str
    name: str
    path: str
    settings: Mapping[str, Any]
    size_bytes: int = 0
    memory_bytes: int = 0


@dataclass(frozen=True, slots=True)
class Job:
    """A case as a worker gets it.

    Attributes
    ----------
    folder
        Dossier folder, absolute.
    fresh
        Whether everything is computed anew.
    heed_claims
        Whether a case that another process is at is left for later.
    code
        `code_digest` of the process that asks, where the worker may have other code; else "".
    limit_s
        Wall time after which the case is given up; None for never.
    """

    slug: str
    name: str
    path: str
    folder: str
    settings: Mapping[str, Any]
    fresh: bool
    heed_claims: bool
    code: str
    limit_s: float | None = None

    def to_json(self) -> str:
        """One line of JSON; undecodable bytes of paths travel as lone surrogates."""
        return json.dumps(asdict(self))

    @staticmethod
    def from_json(text: str | bytes) -> Job:
        return Job(**json.loads(text))


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of a case.

    Attributes
    ----------
    slug
        Of the case.
    status
        See `Status`.
    class_, grade
        Of the verdict; "" where there is none.
    flags
        Codes of its flags, with their severity.
    seconds
        Wall time of this attempt.
    task_seconds
        Time within the tasks that the verdict rests on, those of earlier attempts included.
    message
        Where it failed: one sentence.
    file, line
        Where the failure is, as far as known.
    """

    slug: str
    status: Status
    class_: str = ""
    grade: str = ""
    flags: tuple[tuple[str, str], ...] = ()
    seconds: float = 0.0
    task_seconds: float = 0.0
    message: str = ""
    file: str = ""
    line: int | None = None

    def to_json(self) -> str:
        return json.dumps(asdict(self))

    @staticmethod
    def from_json(text: str | bytes) -> Outcome:
        fields = json.loads(text)
        fields["flags"] = tuple((code, severity) for code, severity in fields["flags"])
        return Outcome(**fields)


@dataclass(frozen=True, slots=True)
class Step:
    """One case has ended: what observers of a screen hear.

    Attributes
    ----------
    case, outcome
        Which, and how.
    done, total
        Cases that have ended, and all of them.
    per_hour
        Cases vetted an hour so far; None before the first.
    left_s
        Estimated time left in seconds; None where nothing can be said.
    """

    case: ScreenCase
    outcome: Outcome
    done: int
    total: int
    per_hour: float | None
    left_s: float | None


@dataclass(frozen=True, slots=True)
class ScreenResult:
    """A screen that went through.

    Attributes
    ----------
    folder
        Where the dossiers are.
    outcomes
        In order of the slugs.
    seconds
        Wall time.
    notes
        What was passed by: folders that cannot be read, columns that are not used.
    names
        Name of each case by slug.
    """

    folder: Path
    outcomes: tuple[Outcome, ...]
    seconds: float
    notes: tuple[str, ...] = ()
    names: Mapping[str, str] = field(default_factory=dict)
