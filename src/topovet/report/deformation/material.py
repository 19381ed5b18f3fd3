"""All that the page and the document of a walk show."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from topovet.deformation.conclusion import Conclusion
from topovet.deformation.results import Walk


@dataclass(frozen=True, slots=True)
class EndEntry:
    """One end as its own verdict says.

    Attributes
    ----------
    name, formula, class_, z2, grade
        From the verdict.
    errors
        Codes of its flags of severity error.
    files
        (name, SHA-256, bytes) of each file read.
    """

    name: str
    formula: str
    class_: str
    z2: tuple[int, ...] | None
    grade: str
    errors: tuple[str, ...]
    files: tuple[tuple[str, str, int], ...]


@dataclass(frozen=True, slots=True, eq=False)
class DeformationMaterial:
    """A walk with its ends, its conclusion and where it comes from.

    Attributes
    ----------
    walk, conclusion
        What was found.
    a, b
        The ends.
    settings
        Options of the run.
    version, packages
        Of topovet, and of the libraries that the numbers rest on.
    """

    walk: Walk
    conclusion: Conclusion
    a: EndEntry
    b: EndEntry
    settings: Mapping[str, Any]
    version: str
    packages: Mapping[str, str]
