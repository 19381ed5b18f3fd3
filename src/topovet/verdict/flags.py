"""Flags: what was found to be wrong or doubtful, with evidence and advice."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

SEVERITIES = ("info", "warning", "error")

Evidence = Mapping[str, "float | int | str | bool | list[float] | list[int] | list[str] | None"]


@dataclass(frozen=True, slots=True)
class Flag:
    """One finding.

    Attributes
    ----------
    code
        One of `topovet.verdict.advice.CODES`.
    severity
        "info", "warning", or "error": an error means that the verdict cannot be stood behind.
    summary
        One sentence with the numbers.
    evidence
        The numbers by name, units in the names.
    advice
        What to do, one or two sentences.
    """

    code: str
    severity: str
    summary: str
    evidence: Evidence = field(default_factory=dict)
    advice: str = ""

    def __post_init__(self) -> None:
        if self.severity not in SEVERITIES:
            raise ValueError(f"unknown severity {self.severity!r}")
