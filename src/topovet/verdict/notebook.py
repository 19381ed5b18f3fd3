"""A verdict as a small HTML table, for notebooks."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from topovet.verdict.document import Verdict


def notebook_html(verdict: Verdict) -> str:
    """The main lines of a verdict; everything that comes from files is escaped."""
    case, gap = verdict.case, verdict.gap
    group = "unknown" if case.space_group is None else case.space_group.symbol
    rows = {
        "case": f"{case.name} ({case.formula}, {group}, {case.dimension}D)",
        "class": f"{verdict.class_}, grade {verdict.confidence.grade}, {verdict.agreement}",
        "Z2": "undetermined" if verdict.invariants.z2 is None else str(verdict.invariants.z2),
        "Z4": "none" if verdict.invariants.z4 is None else str(verdict.invariants.z4),
        "direct gap": _ev(gap.direct_eV) + f" ({gap.method}; {gap.status})",
        "filling": f"{verdict.electrons.filling} ({verdict.electrons.source})",
        "flags": "; ".join(f"{f.severity}: {f.code}" for f in verdict.flags) or "none",
    }
    cells = "".join(
        f"<tr><th style='text-align:left'>{escape(name)}</th>"
        f"<td style='text-align:left'>{escape(text)}</td></tr>"
        for name, text in rows.items()
    )
    return f"<table>{cells}</table>"


def _ev(value: float | None) -> str:
    return "unknown" if value is None else f"{value:.4f} eV"
