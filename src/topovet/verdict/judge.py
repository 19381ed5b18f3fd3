"""The verdict: flags raised, conclusion drawn, every number put in its place."""

from __future__ import annotations

import importlib.metadata
from collections.abc import Mapping, Sequence
from typing import Any

import topovet
from topovet.diagnosis.results import Experiments
from topovet.invariants.band_reps.results import BandSet
from topovet.invariants.results import ChernWitness
from topovet.notation import mev
from topovet.verdict.band_reps import band_representations_entry
from topovet.verdict.budget import error_budget, robustness_radius
from topovet.verdict.conclude import conclude
from topovet.verdict.diagnose import diagnose
from topovet.verdict.document import (
    CaseEntry,
    DiagnosisEntry,
    ElectronsEntry,
    GapEntry,
    InputEntry,
    InversionEntry,
    LowerGapEntry,
    MirrorEntry,
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
from topovet.verdict.flags import Flag
from topovet.verdict.grade import grade
from topovet.verdict.inquiry import Inquiry
from topovet.verdict.measurable import measurable
from topovet.verdict.node_entries import node_entries, search_entry
from topovet.verdict.raised import raise_flags
from topovet.verdict.semimetal import SEMIMETALS, conclude_nodes
from topovet.verdict.tipping import companion_entry, tipping_entries

PACKAGES = ("numpy", "scipy", "ase", "spglib", "networkx", "matplotlib")
"""Libraries whose versions can change a number or a figure."""


def judge(
    findings: Findings,
    experiments: Experiments | None = None,
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
    experiments
        Of a case that is in doubt.
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
    around = conclude_nodes(findings).barrier_ev if conclusion.class_ in SEMIMETALS else None
    if around is not None:  # what holds the nodes survives half of the gap around them
        radius = 500.0 * around
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
        inversion=_inversion(findings),
        witnesses=WitnessesEntry(
            parity=_parity(findings),
            wilson=_wilson(findings),
            surface=_surface(findings),
            mirror=_mirror(findings),
            band_representations=band_representations_entry(findings, conclusion.invariants.z2),
        ),
        invariants=conclusion.invariants,
        agreement=conclusion.agreement,
        class_=conclusion.class_,
        robustness=RobustnessEntry(
            radius_meV=radius,
            errors_meV=error_budget(findings),
            tipping=tipping_entries(findings, conclusion),
            proved=findings.proved_gap_mev is not None,
            companion=companion_entry(findings),
        ),
        flags=flags,
        confidence=grade(findings, conclusion, flags),
        measurable=measurable(findings, conclusion),
        provenance=ProvenanceEntry(
            version=topovet.__version__,
            packages={name: importlib.metadata.version(name) for name in PACKAGES},
            settings=dict(settings),
            task_seconds=dict(task_seconds),
        ),
        diagnosis=_diagnosis(findings, flags, experiments),
        lower_gaps=_lower_gaps(findings),
        nodes=node_entries(findings.nodes),
        node_search=search_entry(findings.nodes),
    )


def _diagnosis(
    findings: Findings, flags: tuple[Flag, ...], experiments: Experiments | None
) -> DiagnosisEntry:
    if experiments is None:
        return DiagnosisEntry()
    return diagnose(Inquiry(findings, flags, experiments))


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
    gap, bound = findings.gap, findings.gap_bound_mev
    if gap is None:
        return GapEntry(None, None, None, None, "unresolved")
    method = "sampled" if bound is None else "bounded"
    if findings.proved_gap_mev is not None:
        method = "proved"
    return GapEntry(
        direct_eV=gap.direct_ev,
        direct_proved_min_eV=None if bound is None else bound / 1000.0,
        direct_k=gap.direct_k,
        indirect_eV=gap.indirect_ev,
        status=gap.status,
        method=method,
        indirect_proved_min_eV=findings.proved_indirect_ev,
    )


def _inversion(findings: Findings) -> InversionEntry:
    """Present where it can be built and no gap can close on the way to having it exactly."""
    test, reason = findings.inversion, findings.inversion.reason
    broken = test.present and findings.inversion_beyond_gap
    if broken:
        reason = f"broken by {mev(test.violation_mev)}, more than the direct gap"
    return InversionEntry(
        present=test.present and not broken,
        centre=test.centre,
        violation_meV=test.violation_mev,
        basis=test.basis,
        reason=reason,
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


def _lower_gaps(findings: Findings) -> tuple[LowerGapEntry, ...] | None:
    if findings.lower is None:
        return None
    levels = findings.band_reps
    below = {} if levels is None else {b.n_bands: b for b in levels.below}
    return tuple(
        LowerGapEntry(
            **_class_of_levels(below.get(g.filling) if g.status != "closed" else None),
            filling=g.filling,
            direct_eV=g.direct_gap_ev,
            direct_k=g.direct_k,
            indirect_eV=g.indirect_gap_ev,
            status=g.status,
            reason=g.reason,
            parity_z2=g.parity_z2,
            z4=g.z4,
            wilson_z2=g.wilson_z2,
            chern=g.chern[0] if g.chern is not None and len(g.chern) == 1 else g.chern,
            direct_proved_min_eV=g.proved_min_ev,
        )
        for g in findings.lower.groups
    )


def _class_of_levels(bands: BandSet | None) -> dict[str, Any]:
    if bands is None:
        return {}
    return {
        "classification": bands.classification,
        "indicator": bands.indicator,
        "obstructed": bands.obstructed,
    }


def _mirror(findings: Findings) -> MirrorEntry:
    mirror = findings.mirror
    if mirror is None:
        return MirrorEntry("not-applicable", findings.missing.get("mirror-chern", "not tested"))
    planes = tuple(
        {
            "plane": p.name,
            "mirror_chern": p.number,
            "status": p.status,
            "reason": p.reason,
            "normal": list(p.normal_cart),
            "mirror_through": list(p.through),
            "violation_meV": p.judged_mev,
            "taken_from": p.taken_from,
        }
        for p in mirror.planes
    )
    return MirrorEntry(mirror.status, mirror.reason, planes)


def _surface(findings: Findings) -> SurfaceEntry:
    surface = findings.surface
    if surface is None:
        return SurfaceEntry("not-applicable", findings.missing.get("surface", "not tested"))
    lines = tuple(
        {
            "from": list(line.start),
            "to": list(line.end),
            "status": line.status,
            "reason": line.reason,
            "parity": line.parity,
            "smallest_window_eV": line.smallest_window_ev,
            "counts": [
                {
                    "termination": c.termination,
                    "curve": c.fraction,
                    "status": c.status,
                    "net": c.net,
                    "points": c.points,
                }
                for c in line.crossings
            ],
        }
        for line in surface.lines
    )
    return SurfaceEntry(
        surface.status,
        surface.reason,
        surface.z2_strong,
        lines,
        z2_partial=surface.z2,
        edge_chern=surface.chern,
        miller=surface.miller,
        chosen_by=surface.chosen_by,
        terminations=surface.terminations,
    )


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
