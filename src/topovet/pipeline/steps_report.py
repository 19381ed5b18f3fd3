"""Task functions that conclude: the verdict, the figures, the report."""

from __future__ import annotations

from dataclasses import replace

from topovet.boundary.arcs.results import ArcSurvey
from topovet.boundary.cone_results import SurfaceStates
from topovet.boundary.results import SurfaceMap, SurfaceWitness
from topovet.deformation.companion import CompanionTest
from topovet.diagnosis.results import Experiments
from topovet.intake.audit_results import HamiltonianAudit
from topovet.invariants.band_reps.path_results import PathConnections
from topovet.invariants.band_reps.results import BandRepWitness
from topovet.invariants.irrep_results import PointIrreps
from topovet.invariants.lower_groups import LowerGroups
from topovet.invariants.mirror_indicators import MirrorIndicator
from topovet.invariants.mirror_witness import MirrorWitness
from topovet.invariants.nodes.results import NodeSearch
from topovet.invariants.results import ChernWitness, ParityWitness, WilsonWitness
from topovet.invariants.rotation_indicators import S4Indicator
from topovet.invariants.tipping.results import TippingSearch
from topovet.model.decay import DecayProfile
from topovet.model.declarations import Declarations
from topovet.pipeline.runner import Context
from topovet.pipeline.task import Task
from topovet.report.material import ReportMaterial
from topovet.spectrum.gap import gap_status
from topovet.spectrum.proof.results import ProvedGap, ProvedIndirectGap
from topovet.spectrum.results import BandPath, Electrons, GapMap, GapSample, InterpolationCheck
from topovet.symmetry.az_class import AzClass
from topovet.symmetry.declaration_results import DeclarationCheck
from topovet.symmetry.group_results import GroupTest
from topovet.symmetry.inference import InferredInversion
from topovet.symmetry.results import (
    InversionTest,
    ShiftTest,
    SpaceGroup,
    SpinOrder,
    TimeReversalTest,
)
from topovet.verdict.document import InputEntry, Verdict
from topovet.verdict.findings import Findings
from topovet.verdict.judge import judge


def collect_findings(
    *,
    context: Context,
    declarations: Declarations,
    audit: HamiltonianAudit,
    decay: DecayProfile,
    spin_order: SpinOrder,
    shift_test: ShiftTest,
    space_group: SpaceGroup | None,
    declaration_check: DeclarationCheck | None,
    inferred_inversion: InferredInversion | None,
    symmetry_class: AzClass | None,
    time_reversal: TimeReversalTest,
    inversion: InversionTest,
    electrons: Electrons,
    gap: GapSample | None,
    gap_proof: ProvedGap | None,
    indirect_gap_proof: ProvedIndirectGap | None,
    nodes: NodeSearch | None,
    parity: ParityWitness | None,
    inferred_parity: ParityWitness | None,
    group: GroupTest | None,
    wilson: WilsonWitness | None,
    chern: ChernWitness | None,
    s4: S4Indicator | None,
    mirror_chern: MirrorWitness | None,
    mirror_indicators: tuple[MirrorIndicator, ...] | None,
    band_representations: BandRepWitness | None,
    band_connections: PathConnections | None,
    lower_gaps: LowerGroups | None,
    surface: SurfaceWitness | None,
    tipping: TippingSearch | None,
    spinless_companion: CompanionTest | None,
    surface_states: SurfaceStates | None,
    fermi_arcs: ArcSurvey | None,
    interpolation: InterpolationCheck | None,
) -> Findings:
    """What all steps found, and why a step found nothing."""
    return Findings(
        declared=declarations,
        spinful=bool(declarations.spinful),
        audit=audit,
        decay=decay,
        spin_order=spin_order,
        shift_test=shift_test,
        space_group=space_group,
        declaration=declaration_check,
        inferred=inferred_inversion,
        symmetry_class=symmetry_class,
        time_reversal=time_reversal,
        inversion=inversion,
        electrons=electrons,
        gap=_with_nodes(_with_attained(gap, gap_proof), nodes),
        gap_proof=None if gap_proof is None else gap_proof.proof,
        indirect_proof=None if indirect_gap_proof is None else indirect_gap_proof.proof,
        nodes=nodes,
        parity=parity,
        inferred_parity=inferred_parity,
        group=group,
        wilson=wilson,
        chern=chern,
        s4=s4,
        mirror=mirror_chern,
        mirror_indicators=mirror_indicators or (),
        band_reps=band_representations,
        connections=band_connections,
        lower=lower_gaps,
        surface=surface,
        tipping=tipping,
        companion=spinless_companion,
        surface_states=surface_states,
        arcs=fermi_arcs,
        interpolation=interpolation,
        missing={state.name: state.reason for state in context.trail if state.reason},
    )


def _with_attained(gap: GapSample | None, proved: ProvedGap | None) -> GapSample | None:
    """The sampled gap, or the smaller one that the search for a proof met on its way."""
    if gap is None or proved is None or proved.proof.attained_ev >= gap.direct_ev:
        return gap
    attained = proved.proof.attained_ev
    return replace(
        gap,
        direct_ev=attained,
        direct_k=proved.proof.k_frac,
        status=gap_status(attained, gap.indirect_ev),
    )


def _with_nodes(gap: GapSample | None, nodes: NodeSearch | None) -> GapSample | None:
    """The gap, or the smaller one that the search for nodes met."""
    if gap is None or nodes is None or nodes.attained_ev is None or nodes.attained_k is None:
        return gap
    if nodes.attained_ev >= gap.direct_ev:
        return gap
    return replace(
        gap,
        direct_ev=nodes.attained_ev,
        direct_k=nodes.attained_k,
        status=gap_status(nodes.attained_ev, gap.indirect_ev),
    )


def conclude_case(
    *, context: Context, findings: Findings, experiments: Experiments | None
) -> Verdict:
    """The verdict from the results of all steps."""
    seconds = {s.name: round(s.seconds, 4) for s in context.trail if s.seconds is not None}
    return judge(
        findings,
        experiments,
        inputs=[InputEntry(i.file, i.sha256, i.bytes) for i in context.inputs],
        settings=context.settings,
        task_seconds=seconds,
    )


def gather(
    *,
    context: Context,
    verdict: Verdict,
    findings: Findings,
    bands: BandPath | None,
    irreps: tuple[PointIrreps, ...] | None,
    surface_map: tuple[SurfaceMap, ...] | None,
    gap_map: GapMap | None,
) -> ReportMaterial:
    """All that the report shows; the graph of tasks is added by the dossier."""
    assert findings.electrons is not None
    return ReportMaterial(
        verdict=verdict,
        crystal=findings.declared.crystal,
        bands=bands,
        irreps=irreps or (),
        surface_maps=surface_map or (),
        gap_map=gap_map,
        tasks=(),
        **{name: getattr(findings, name) for name in SHOWN},
    )


SHOWN = (
    "space_group",
    "inferred",
    "symmetry_class",
    "time_reversal",
    "inversion",
    "electrons",
    "gap",
    "gap_proof",
    "indirect_proof",
    "nodes",
    "parity",
    "group",
    "wilson",
    "chern",
    "s4",
    "mirror",
    "mirror_indicators",
    "band_reps",
    "connections",
    "lower",
    "surface",
    "tipping",
    "surface_states",
    "interpolation",
    "audit",
    "decay",
    "spin_order",
)
"""Findings that the report shows as they are."""

JUDGED = (
    "declarations",
    "audit",
    "decay",
    "spin-order",
    "time-reversal",
    "inversion",
    "electrons",
)
"""Results without which there is no verdict."""

IF_THERE = (
    "space-group",
    "inferred-inversion",
    "symmetry-class",
    "gap",
    "gap-proof",
    "indirect-gap-proof",
    "nodes",
    "parity",
    "wilson",
    "chern",
    "s4",
    "mirror-chern",
    "mirror-indicators",
    "band-representations",
    "band-connections",
    "lower-gaps",
    "surface",
    "tipping",
    "spinless-companion",
    "surface-states",
    "fermi-arcs",
    "group",
    "interpolation",
)
"""Results that a verdict and its report use where there are any."""

TASKS = (
    Task(
        "findings",
        "lay all results side by side",
        collect_findings,
        needs=(*JUDGED, "shift-test"),
        wants=(*IF_THERE, "declaration-check", "inferred-parity"),
        stored=False,
        essential=True,
    ),
    Task(
        "verdict",
        "draw the conclusion and raise the flags",
        conclude_case,
        needs=("findings",),
        wants=("experiments",),
        stored=False,
        essential=True,
    ),
    Task(
        "report-material",
        "gather what the report shows",
        gather,
        needs=("verdict", "findings"),
        wants=("irreps", "bands", "surface-map", "gap-map"),
        stored=False,
        essential=True,
    ),
)
