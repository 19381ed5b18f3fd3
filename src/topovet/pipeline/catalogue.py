"""The tasks of one case, and the dataclasses that their results are made of."""

from __future__ import annotations

from topovet.boundary import cone_results as cones
from topovet.boundary import results as boundary
from topovet.boundary.arcs import results as arcs
from topovet.deformation.companion import CompanionTest
from topovet.diagnosis import results as diagnosis
from topovet.intake import records
from topovet.intake.audit_results import HamiltonianAudit
from topovet.invariants import irrep_results as irreps
from topovet.invariants import lower_groups, mirror_indicators, mirror_witness
from topovet.invariants import results as invariants
from topovet.invariants import rotation_indicators as rotations
from topovet.invariants.band_reps import path_results as band_path
from topovet.invariants.band_reps import results as band_reps
from topovet.invariants.nodes import results as nodes
from topovet.invariants.rotation_eigenvalues import EigenvalueCount
from topovet.invariants.tipping.results import TippingPoint, TippingSearch
from topovet.model.cell_relation import CellRelation
from topovet.model.crystal import Crystal
from topovet.model.decay import DecayProfile
from topovet.model.declarations import Declarations
from topovet.model.plane import KPlane
from topovet.pipeline import (
    steps_arcs,
    steps_bandreps,
    steps_boundary,
    steps_companion,
    steps_diagnosis,
    steps_intake,
    steps_lower,
    steps_nodes,
    steps_physics,
    steps_proof,
    steps_report,
    steps_shifts,
    steps_symmetry,
    steps_tipping,
    steps_witnesses,
)
from topovet.pipeline.codec import Codec
from topovet.pipeline.task import Task
from topovet.spectrum import results as spectrum
from topovet.spectrum.proof import results as proof
from topovet.symmetry import group_results
from topovet.symmetry import results as symmetry
from topovet.symmetry.az_class import AzClass
from topovet.symmetry.centre_search import CentreTrial
from topovet.symmetry.declaration_results import (
    Correction,
    DeclarationCheck,
    FunctionAgreement,
    OperatorFit,
)
from topovet.symmetry.declaration_trials import Reading
from topovet.symmetry.inference import InferredInversion
from topovet.symmetry.irrep_names import IrrepName

STORED_TYPES = (
    records.CaseSettings,
    records.DeclaredOrbital,
    Crystal,
    Declarations,
    CellRelation,
    HamiltonianAudit,
    DecayProfile,
    symmetry.SpinOrder,
    symmetry.InversionOperator,
    InferredInversion,
    DeclarationCheck,
    OperatorFit,
    FunctionAgreement,
    Correction,
    Reading,
    CentreTrial,
    AzClass,
    diagnosis.Rereading,
    diagnosis.NoiseTest,
    diagnosis.Experiments,
    symmetry.SpaceGroup,
    symmetry.TimeReversalTest,
    symmetry.InversionTest,
    symmetry.ShiftTest,
    group_results.OperationTest,
    group_results.FoundGroup,
    group_results.GroupTest,
    spectrum.Electrons,
    spectrum.GapSample,
    spectrum.GapMap,
    proof.GapProof,
    proof.IndirectGapProof,
    proof.Certificate,
    proof.ProvedGap,
    proof.ProvedIndirectGap,
    spectrum.BandPath,
    spectrum.InterpolationCheck,
    invariants.TrimParity,
    invariants.ParityWitness,
    invariants.WilsonPlane,
    invariants.WilsonWitness,
    invariants.ChernPlane,
    invariants.ChernWitness,
    invariants.MirrorChern,
    mirror_witness.MirrorPlane,
    mirror_witness.MirrorWitness,
    mirror_indicators.MirrorIndicator,
    KPlane,
    lower_groups.LowerGroup,
    lower_groups.LowerGroups,
    IrrepName,
    irreps.IrrepContent,
    irreps.LevelIrreps,
    irreps.PointIrreps,
    band_reps.AtomicLimit,
    band_reps.PointColumns,
    band_reps.BandSet,
    band_reps.LineLevels,
    band_reps.BandRepWitness,
    band_path.EndLevel,
    band_path.LevelConnection,
    band_path.LevelCrossing,
    band_path.PathSegment,
    band_path.PathConnections,
    EigenvalueCount,
    rotations.S4Axis,
    rotations.S4Indicator,
    nodes.PointNode,
    nodes.NodalLine,
    nodes.Pocket,
    nodes.Reference,
    nodes.NodeSearch,
    arcs.Projection,
    arcs.LoopCount,
    arcs.Arc,
    arcs.ArcSurvey,
    boundary.Crossing,
    boundary.SurfaceLine,
    boundary.SurfaceWitness,
    boundary.SurfaceMap,
    TippingPoint,
    TippingSearch,
    CompanionTest,
    boundary.ThicknessSeries,
    cones.KramersPair,
    cones.Contour,
    cones.Warping,
    cones.Cone,
    cones.EnergyMap,
    cones.EdgeCrossing,
    cones.SurfaceStates,
)
"""Dataclasses that results on disk are made of."""


def result_codec() -> Codec:
    """Reads and writes the results of all stored tasks."""
    return Codec(STORED_TYPES)


def case_tasks() -> tuple[Task, ...]:
    """All tasks of one case; every one is declared below the function that does its work."""
    return (
        *steps_intake.TASKS,
        *steps_shifts.TASKS,
        *steps_physics.TASKS,
        *steps_proof.TASKS,
        *steps_nodes.TASKS,
        *steps_symmetry.TASKS,
        *steps_companion.TASKS,
        *steps_witnesses.TASKS,
        *steps_bandreps.TASKS,
        *steps_lower.TASKS,
        *steps_boundary.TASKS,
        *steps_arcs.TASKS,
        *steps_tipping.TASKS,
        *steps_report.TASKS,
        *steps_diagnosis.TASKS,
    )
