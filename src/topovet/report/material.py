"""All that the report shows, gathered in one place: results only, no way to compute more."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.boundary.cone_results import SurfaceStates
from topovet.boundary.results import SurfaceMap, SurfaceWitness
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
from topovet.model.crystal import Crystal
from topovet.model.decay import DecayProfile
from topovet.spectrum.proof.results import GapProof, IndirectGapProof
from topovet.spectrum.results import (
    BandPath,
    Electrons,
    GapMap,
    GapSample,
    InterpolationCheck,
)
from topovet.symmetry.az_class import AzClass
from topovet.symmetry.group_results import GroupTest
from topovet.symmetry.inference import InferredInversion
from topovet.symmetry.results import InversionTest, SpaceGroup, SpinOrder, TimeReversalTest
from topovet.verdict.document import Verdict

TASK_STATES = ("done", "cached", "skipped", "failed", "not-applicable")


@dataclass(frozen=True, slots=True)
class TaskEntry:
    """One task of the run, as it went.

    Attributes
    ----------
    name
        Its name, unique in the run.
    needs
        Names of the tasks whose results it takes.
    state
        One of `TASK_STATES`.
    reason
        Why it was not run or failed; empty otherwise.
    seconds
        Wall time, s; of the original run where the result came from the cache; None if never run.
    about
        What it does, in one clause.
    """

    name: str
    needs: tuple[str, ...]
    state: str
    reason: str
    seconds: float | None
    about: str

    def __post_init__(self) -> None:
        if self.state not in TASK_STATES:
            raise ValueError(f"unknown task state {self.state!r}")


@dataclass(frozen=True, slots=True, eq=False)
class ReportMaterial:
    """What one dossier is written from.

    Attributes
    ----------
    verdict
        The content of `verdict.json`.
    crystal
        Cell (angstrom) and atoms of the Hamiltonian's own cell.
    space_group
        None where no structure could be analysed.
    inferred
        Inversion inferred from the Hamiltonian; None where the structure has none.
    symmetry_class
        Altland-Zirnbauer class.
    time_reversal, inversion
        Symmetry tests with their residuals in meV.
    electrons
        The filling and where it comes from.
    gap
        Sampled gaps in eV; None where they were not computed.
    bands
        Bands along the special-point path; None where they were not computed.
    parity
        Parities at the TRIM with all levels; None where the witness did not run at all.
    group
        Every operation of the structure tested on the Hamiltonian; None without declared orbitals.
    wilson, chern
        Wilson loops and Chern numbers with their planes; None where they did not run.
    s4
        S4 indicator; None where the group has no S4 or time reversal is broken.
    irreps
        Irreps of the bands at the special points; empty where they were not found.
    interpolation
        Differences to the energies that came with the case, meV; None without such files.
    audit
        Soundness of the file.
    decay
        Largest elements (meV) by distance (angstrom).
    spin_order
        The order of the file's functions, with the violation (meV) in either.
    tasks
        The task graph as it was run.
    log_note
        One sentence on where the log is or what it says; may be empty.
    mirror
        Mirror Chern numbers; None where no mirror was tested.
    mirror_indicators
        Mirror Chern numbers modulo n from rotation eigenvalues; empty without such axes.
    band_reps
        Bands held against all atomic limits; None where they were not.
    connections
        How bands connect along the path; None where that was not asked.
    lower
        Groups of bands below lower gaps; None where they were not asked for.
    surface
        Crossings of surface levels; None where no surface was followed.
    surface_states
        Bands of the surface and what can be measured of them; None where they were not followed.
    surface_maps
        Spectral density of both terminations; empty where none was made.
    gap_proof, indirect_proof
        Proofs of the gaps; None where none was made.
    gap_map
        Direct gap over a plane through its minimum.
    tipping
        How far H may move before its indices change; None where it was not asked.
    nodes
        Closings of the gap; None where none were looked for.
    """

    verdict: Verdict
    crystal: Crystal
    space_group: SpaceGroup | None
    inferred: InferredInversion | None
    symmetry_class: AzClass | None
    time_reversal: TimeReversalTest
    inversion: InversionTest
    electrons: Electrons
    gap: GapSample | None
    bands: BandPath | None
    group: GroupTest | None
    parity: ParityWitness | None
    wilson: WilsonWitness | None
    chern: ChernWitness | None
    s4: S4Indicator | None
    irreps: tuple[PointIrreps, ...]
    interpolation: InterpolationCheck | None
    audit: HamiltonianAudit
    decay: DecayProfile
    spin_order: SpinOrder
    tasks: tuple[TaskEntry, ...]
    log_note: str = ""
    mirror: MirrorWitness | None = None
    mirror_indicators: tuple[MirrorIndicator, ...] = ()
    band_reps: BandRepWitness | None = None
    connections: PathConnections | None = None
    lower: LowerGroups | None = None
    surface: SurfaceWitness | None = None
    surface_states: SurfaceStates | None = None
    surface_maps: tuple[SurfaceMap, ...] = ()
    gap_proof: GapProof | None = None
    indirect_proof: IndirectGapProof | None = None
    gap_map: GapMap | None = None
    tipping: TippingSearch | None = None
    nodes: NodeSearch | None = None
