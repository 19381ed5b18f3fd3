"""All flags of a case."""

from __future__ import annotations

from topovet.verdict.findings import Findings
from topovet.verdict.flags import SEVERITIES, Flag
from topovet.verdict.flags_intake import intake_flags
from topovet.verdict.flags_spectrum import spectrum_flags
from topovet.verdict.flags_symmetry import symmetry_flags
from topovet.verdict.flags_witnesses import witness_flags


def raise_flags(findings: Findings) -> tuple[Flag, ...]:
    """All flags, the most severe first."""
    raised = [
        *intake_flags(findings),
        *symmetry_flags(findings),
        *spectrum_flags(findings),
        *witness_flags(findings),
    ]
    return tuple(sorted(raised, key=lambda flag: -SEVERITIES.index(flag.severity)))
