"""The verdict: flags raised, conclusion drawn, every number put in its place."""

from __future__ import annotations

import importlib.metadata
from collections.abc import Mapping, Sequence
from typing import Any

import topovet
from topovet.invariants.results import ChernWitness
from topovet.verdict.budget import error_budget, robustness_radius
from topovet.verdict.conclude import conclude
from topovet.verdict.document import (
    CaseEntry,
    ElectronsEntry,
    GapEntry,
    InputEntry,
    InversionEntry,
    ParityEntry,
    ProvenanceEntry,
    RobustnessEntry,
    SpaceGroupEntry,
    SurfaceEntry,
    TimeReversalEntry,
    TrimEntry,
    Verdict,
    WilsonEntry,
    WitnessesEntry,
)
from topovet.verdict.findings import Findings
from topovet.verdict.flags import SEVERITIES, Flag
from topovet.verdict.flags_intake import intake_flags
from topovet.verdict.flags_spectrum import spectrum_flags
from topovet.verdict.flags_symmetry import symmetry_flags
from topovet.verdict.flags_witnesses import witness_flags
from topovet.verdict.grade import grade

PACKAGES = ("numpy", "scipy", "ase", "spglib", "networkx", "matplotlib")
"""Libraries whose versions can change a number or a figure."""

NOT_IN_THIS_VERSION = "not part of this version"


def judge(
    findings: Findings,
    *,
    inputs: Sequence[InputEntry],
    settings: Mapping[str, Any],
    task_seconds: Mapping[str, float],
) -> Verdict:
    """The verdict on one case.

    Parameters
    ----------
    findings
        Results of all steps.
    inputs
        The files that were read, with their hashes.
    settings
        Options of the run, for the provenance.
    task_seconds
        Wall time of each task that ran.

    Raises
    ------
    ValueError
        The findings are an intake audit only, without the electron count.
    """
    electrons = findings.electrons
    if electrons is None:
        raise ValueError("a verdict needs the electron count")
    flags = raise_flags(findings)
    conclusion = conclude(findings, flags)
    radius = robustness_radius(findings)
    return Verdict(
        case=_case(findings),
        inputs=tuple(inputs),
        electrons=ElectronsEntry(
            filling=electrons.filling,
            source=electrons.source,
            fermi_eV=electrons.fermi_ev,
            how=electrons.how,
        ),
        gap=_gap(findings),
        time_reversal=TimeReversalEntry(
            present=findings.time_reversal.present,
            violation_meV=_finite(findings.time_reversal.violation_mev),
            spin_order=findings.spin_order.found,
        ),
        inversion=InversionEntry(
            present=findings.inversion.present,
            centre=findings.inversion.centre,
            violation_meV=findings.inversion.violation_mev,
            basis=findings.inversion.basis,
            reason=findings.inversion.reason,
        ),
        witnesses=WitnessesEntry(
            parity=_parity(findings),
            wilson=_wilson(findings),
            surface=SurfaceEntry("not-applicable", NOT_IN_THIS_VERSION),
        ),
        invariants=conclusion.invariants,
        agreement=conclusion.agreement,
        class_=conclusion.class_,
        robustness=RobustnessEntry(radius_meV=radius, errors_meV=error_budget(findings)),
        flags=flags,
        confidence=grade(findings, conclusion, flags),
        measurable={},
        provenance=ProvenanceEntry(
            version=topovet.__version__,
            packages={name: importlib.metadata.version(name) for name in PACKAGES},
            settings=dict(settings),
            task_seconds=dict(task_seconds),
        ),
    )


def raise_flags(findings: Findings) -> tuple[Flag, ...]:
    """All flags, the most severe first."""
    raised = [
        *intake_flags(findings),
        *symmetry_flags(findings),
        *spectrum_flags(findings),
        *witness_flags(findings),
    ]
    return tuple(sorted(raised, key=lambda flag: -SEVERITIES.index(flag.severity)))


def _case(findings: Findings) -> CaseEntry:
    declared, group = findings.declared, findings.space_group
    return CaseEntry(
        name=declared.name,
        formula=declared.crystal.formula,
        dimension=declared.crystal.dimension,
        spinful=findings.spinful,
        num_wann=findings.audit.n_wann,
        space_group=None if group is None else SpaceGroupEntry(group.number, group.symbol),
    )


def _gap(findings: Findings) -> GapEntry:
    gap = findings.gap
    if gap is None:
        return GapEntry(None, None, None, None, "unresolved")
    return GapEntry(
        direct_eV=gap.direct_ev,
        direct_proved_min_eV=None,
        direct_k=gap.direct_k,
        indirect_eV=gap.indirect_ev,
        status=gap.status,
    )


def _parity(findings: Findings) -> ParityEntry:
    parity = findings.parity
    if parity is None:
        reason = findings.inversion.reason or findings.missing.get("parity", "")
        return ParityEntry("not-applicable", reason, None, None)
    trim = tuple(
        TrimEntry(t.k, t.n_plus, t.n_minus, t.delta, t.purity, t.gap_ev) for t in parity.trim
    )
    return ParityEntry(parity.status, parity.reason, parity.z2, parity.z4, trim)


def _wilson(findings: Findings) -> WilsonEntry:
    wilson, chern = findings.wilson, findings.chern
    counted = {} if chern is None or chern.chern is None else _chern_by_direction(chern)
    if wilson is None:
        reason = findings.missing.get("wilson", "not tested")
        if chern is None:
            return WilsonEntry("not-applicable", reason)
        return WilsonEntry(chern.status, chern.reason, chern=counted)
    planes = tuple(
        {
            "plane": plane.plane,
            "status": plane.status,
            "z2": plane.z2,
            "lines": plane.lines,
            "smallest_gap": plane.smallest_gap,
            "smallest_direct_gap_eV": plane.smallest_direct_gap_ev,
        }
        for plane in wilson.planes
    )
    return WilsonEntry(wilson.status, wilson.reason, wilson.z2, planes, counted)


def _chern_by_direction(chern: ChernWitness) -> dict[str, int]:
    """Chern number by the planes it belongs to."""
    assert chern.chern is not None
    if len(chern.chern) == 1:
        return {chern.planes[0].plane: chern.chern[0]}
    return {f"k{i}=const": value for i, value in enumerate(chern.chern, start=1)}


def _finite(value: float) -> float | None:
    return value if abs(value) != float("inf") else None
