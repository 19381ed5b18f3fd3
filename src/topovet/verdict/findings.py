"""Everything the verdict is drawn from, in one place."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from topovet.boundary.arcs.results import ArcSurvey
from topovet.boundary.cone_results import SurfaceStates
from topovet.boundary.results import SurfaceWitness
from topovet.deformation.companion import CompanionTest
from topovet.intake.audit_results import HamiltonianAudit
from topovet.invariants.band_reps.path_results import PathConnections
from topovet.invariants.band_reps.results import BandRepWitness
from topovet.invariants.lower_groups import LowerGroups
from topovet.invariants.mirror_indicators import MirrorIndicator
from topovet.invariants.mirror_witness import MirrorWitness
from topovet.invariants.nodes.results import NodeSearch
from topovet.invariants.results import ChernWitness, ParityWitness, WilsonWitness
from topovet.invariants.rotation_indicators import S4Indicator
from topovet.invariants.tipping.results import TippingSearch
from topovet.model.decay import DecayProfile
from topovet.model.declarations import Declarations
from topovet.spectrum.proof.results import GapProof, IndirectGapProof
from topovet.spectrum.results import Electrons, GapSample, InterpolationCheck
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
from topovet.verdict import criteria


@dataclass(frozen=True, slots=True, eq=False)
class Findings:
    """Results of all steps; None where a step has none, with the reason in `missing`.

    An intake audit alone has neither electrons nor anything that needs them.

    Attributes
    ----------
    missing
        Why a step has no result, by task name.
    """

    declared: Declarations
    spinful: bool
    audit: HamiltonianAudit
    decay: DecayProfile
    spin_order: SpinOrder
    time_reversal: TimeReversalTest
    inversion: InversionTest
    shift_test: ShiftTest | None = None
    space_group: SpaceGroup | None = None
    declaration: DeclarationCheck | None = None
    inferred: InferredInversion | None = None
    symmetry_class: AzClass | None = None
    electrons: Electrons | None = None
    gap: GapSample | None = None
    gap_proof: GapProof | None = None
    indirect_proof: IndirectGapProof | None = None
    nodes: NodeSearch | None = None
    group: GroupTest | None = None
    parity: ParityWitness | None = None
    inferred_parity: ParityWitness | None = None
    wilson: WilsonWitness | None = None
    chern: ChernWitness | None = None
    s4: S4Indicator | None = None
    mirror: MirrorWitness | None = None
    mirror_indicators: tuple[MirrorIndicator, ...] = ()
    band_reps: BandRepWitness | None = None
    connections: PathConnections | None = None
    lower: LowerGroups | None = None
    surface: SurfaceWitness | None = None
    tipping: TippingSearch | None = None
    companion: CompanionTest | None = None
    surface_states: SurfaceStates | None = None
    arcs: ArcSurvey | None = None
    interpolation: InterpolationCheck | None = None
    missing: Mapping[str, str] = field(default_factory=dict)

    @property
    def kramers(self) -> bool:
        """Time reversal squares to -1: bands come in Kramers pairs at the TRIM."""
        return self.spinful and self.time_reversal.present

    @property
    def direct_gap_mev(self) -> float | None:
        return None if self.gap is None else 1000.0 * self.gap.direct_ev

    @property
    def gap_bound_mev(self) -> float | None:
        """Bound that the direct gap exceeds at every k, however loose; None where there is none."""
        proof = self.gap_proof
        return None if proof is None or proof.proved_min_ev <= 0 else 1000.0 * proof.proved_min_ev

    @property
    def proved_gap_mev(self) -> float | None:
        """The same where it is close enough to the gap attained to stand for the gap."""
        proof, bound = self.gap_proof, self.gap_bound_mev
        if proof is None or proof.proved_min_ev < criteria.LOOSEST_BOUND * proof.attained_ev:
            return None
        return bound

    @property
    def proved_indirect_ev(self) -> float | None:
        """Bound that the indirect gap exceeds, where it says that the bands do not overlap."""
        proof = self.indirect_proof
        return None if proof is None or proof.proved_min_ev <= 0 else proof.proved_min_ev

    @property
    def same_shifts_as_bands(self) -> bool:
        """Whether H(k) is meant to interpolate as the `_band.dat` that came with it does."""
        mended = self.shift_test is not None and self.shift_test.adopted == "mended"
        return not mended and self.audit.shift_source != "rebuilt from declared sites"

    @property
    def inversion_beyond_gap(self) -> bool:
        """Whether H may lie beyond a gap closing from its inversion-symmetric average.

        The average is half of the violation away, so indices are safe while the violation is below
        the gap (Weyl). Shifts that are not available break inversion between mesh points only,
        which is an artefact of reading: there the TRIM, which are mesh points, decide.
        """
        test, gap = self.inversion, self.direct_gap_mev
        missing_shifts = self.audit.shift_source == "not available"
        violation = test.violation_trim_mev if missing_shifts else test.violation_mev
        return gap is not None and violation is not None and violation >= gap
