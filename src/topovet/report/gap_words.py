"""The proof of the gap in words, and the error budget against the radius as rows of a table."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.notation import ev, mev, one_line
from topovet.report.material import ReportMaterial
from topovet.spectrum.proof.results import GapProof
from topovet.verdict.budget import total_error
from topovet.verdict.document import Verdict

ERRORS = {
    "rounding": "Rounding of the printed digits",
    "hermiticity": "Hermiticity, half of the violation",
    "time_reversal": "Time reversal, half of the residual",
    "symmetry": "Inversion, half of the residual",
    "range": "What the finite mesh cuts off (estimate)",
    "interpolation": "Filled energies against .eig and _band.dat",
}
"""What each entry of the error budget is."""

DECADES = 5.0
"""Bars reach over so many powers of ten below the longest."""


def certificate_lines(material: ReportMaterial) -> tuple[str, ...]:
    """What is proved of the gap, by how much work, and what a mesh alone would have said."""
    lines = []
    proof, indirect, gap = material.gap_proof, material.indirect_proof, material.gap
    if proof is not None:
        lines.append(_direct(proof))
    if indirect is not None and indirect.proved_min_ev > 0:
        n_boxes = indirect.valence.n_boxes + indirect.conduction.n_boxes
        lines.append(
            f"The indirect gap exceeds {ev(indirect.proved_min_ev)}: {n_boxes:,} boxes bound both "
            f"band edges; {ev(indirect.attained_ev)} is attained."
        )
    if gap is not None:
        n = " × ".join(str(n) for n in gap.mesh)
        lines.append(
            f"A mesh of {n} points alone would have said {ev(gap.mesh_direct_ev)} for the direct "
            f"gap; following it downhill led to {ev(gap.direct_ev)}."
        )
    return tuple(lines)


def _direct(proof: GapProof) -> str:
    attained = f"{ev(proof.attained_ev)} is attained"
    work = f"{proof.n_boxes:,} boxes, {proof.n_solves:,} eigenvalue problems"
    if proof.n_operations > 1:
        work += f", {proof.n_operations} images of each k"
    cost = f"; {mev(1000 * proof.symmetry_cost_ev)} of symmetry residuals taken off"
    if proof.proved_min_ev <= 0:
        return f"No gap is proved ({one_line(proof.reason)}); {attained} ({work})."
    ended = f" The search ended early: {one_line(proof.reason)}." if proof.reason else ""
    return (
        f"The direct gap exceeds {ev(proof.proved_min_ev)} at every k; {attained} "
        f"({work}{cost if proof.n_operations > 1 else ''}).{ended}"
    )


@dataclass(frozen=True, slots=True)
class ErrorRow:
    """One error of the budget.

    Attributes
    ----------
    name
        For people.
    mev
        None where it was not measured.
    share
        Length of its bar in percent of the scale, which is logarithmic.
    kind
        "part", "sum" or "radius".
    """

    name: str
    mev: float | None
    share: float
    kind: str


def error_rows(verdict: Verdict) -> tuple[ErrorRow, ...]:
    """Each known error, their sum and the robustness radius on one logarithmic scale."""
    errors = dict(verdict.robustness.errors_meV)
    radius, total = verdict.robustness.radius_meV, total_error(errors)
    longest = max([total, radius or 0.0, *(e or 0.0 for e in errors.values())])

    def share(value: float | None) -> float:
        if value is None or value <= 0 or longest <= 0:
            return 0.0
        return round(float(np.clip(100 * (1 + np.log10(value / longest) / DECADES), 0, 100)), 1)

    parts = [
        ErrorRow(ERRORS.get(name, name.replace("_", " ")), value, share(value), "part")
        for name, value in errors.items()
    ]
    return (
        *parts,
        ErrorRow("Sum", total, share(total), "sum"),
        ErrorRow("Robustness radius, half of the gap", radius, share(radius), "radius"),
    )
