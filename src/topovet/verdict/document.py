"""The verdict as an object: the fields of `verdict.json`, one to one.

`Verdict.as_dict` gives the JSON document; the schema is `topovet/report/verdict.schema.json`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, fields, is_dataclass
from typing import Any

from topovet.verdict.flags import Flag
from topovet.verdict.notebook import notebook_html

SCHEMA = "topovet.verdict/1"


@dataclass(frozen=True, slots=True)
class SpaceGroupEntry:
    number: int
    symbol: str


@dataclass(frozen=True, slots=True)
class CaseEntry:
    name: str
    formula: str
    dimension: int
    spinful: bool
    num_wann: int
    space_group: SpaceGroupEntry | None


@dataclass(frozen=True, slots=True)
class InputEntry:
    file: str
    sha256: str
    bytes: int


@dataclass(frozen=True, slots=True)
class ElectronsEntry:
    filling: int
    source: str
    fermi_eV: float | None  # noqa: N815
    how: str = ""


@dataclass(frozen=True, slots=True)
class GapEntry:
    direct_eV: float | None  # noqa: N815
    direct_proved_min_eV: float | None  # noqa: N815
    direct_k: tuple[float, float, float] | None
    indirect_eV: float | None  # noqa: N815
    status: str
    method: str = "sampled"
    indirect_proved_min_eV: float | None = None  # noqa: N815


@dataclass(frozen=True, slots=True)
class TimeReversalEntry:
    present: bool
    violation_meV: float | None  # noqa: N815
    spin_order: str


@dataclass(frozen=True, slots=True)
class InversionEntry:
    present: bool
    centre: tuple[float, float, float] | None
    violation_meV: float | None  # noqa: N815
    basis: str
    reason: str = ""


@dataclass(frozen=True, slots=True)
class TrimEntry:
    k: tuple[float, float, float]
    n_plus: int
    n_minus: int
    delta: int
    purity: float
    gap_eV: float  # noqa: N815


@dataclass(frozen=True, slots=True)
class ParityEntry:
    status: str
    reason: str
    z2: tuple[int, ...] | None
    z4: int | None
    trim: tuple[TrimEntry, ...] = ()


@dataclass(frozen=True, slots=True)
class WilsonEntry:
    status: str
    reason: str
    z2: tuple[int, ...] | None = None
    planes: tuple[Mapping[str, Any], ...] = ()
    chern: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class SurfaceEntry:
    """Surface or edge states; z2_partial is None at an index that the surface does not settle.

    `crossings` holds the lines between surface TRIM in the reciprocal lattice of the surface;
    miller refers to the Hamiltonian's own cell.
    """

    status: str
    reason: str
    z2_strong: int | None = None
    crossings: tuple[Mapping[str, Any], ...] = ()
    z2_partial: tuple[int | None, ...] | None = None
    edge_chern: int | None = None
    miller: tuple[int, int, int] | None = None
    chosen_by: str = ""
    terminations: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class MirrorEntry:
    """Mirror Chern numbers; `planes` says of each how it was found."""

    status: str = "not-applicable"
    reason: str = ""
    planes: tuple[Mapping[str, Any], ...] = ()


@dataclass(frozen=True, slots=True)
class BandRepresentationsEntry:
    """The occupied bands, and other isolated sets, against all atomic limits of the group.

    `allowed` lists the invariants of the group and what the values of its indicators leave of each.
    """

    status: str = "not-applicable"
    reason: str = ""
    group: str | None = None
    indicator_group: tuple[int, ...] | None = None
    indicator: tuple[int, ...] | None = None
    classification: str | None = None
    atomic_limits: tuple[Mapping[str, Any], ...] = ()
    obstructed: bool | None = None
    crossings: tuple[str, ...] = ()
    z2_partial: tuple[int | None, ...] | None = None
    multiplicities: tuple[Mapping[str, Any], ...] = ()
    lines: tuple[Mapping[str, Any], ...] = ()
    isolated_sets: tuple[Mapping[str, Any], ...] = ()
    connections: Mapping[str, Any] | None = None
    allowed: Mapping[str, Any] | None = None


@dataclass(frozen=True, slots=True)
class WitnessesEntry:
    parity: ParityEntry
    wilson: WilsonEntry
    surface: SurfaceEntry
    mirror: MirrorEntry = field(default_factory=MirrorEntry)
    band_representations: BandRepresentationsEntry = field(default_factory=BandRepresentationsEntry)


@dataclass(frozen=True, slots=True)
class InvariantsEntry:
    z2: tuple[int, ...] | None = None
    z4: int | None = None
    indicators: Mapping[str, int] = field(default_factory=dict)
    chern: int | tuple[int, int, int] | None = None
    mirror_chern: Mapping[str, int] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class LowerGapEntry:
    """The lowest bands up to one lower gap: what each witness says of them."""

    filling: int
    direct_eV: float  # noqa: N815
    direct_k: tuple[float, float, float]
    indirect_eV: float  # noqa: N815
    status: str
    reason: str
    parity_z2: tuple[int, ...] | None
    z4: int | None
    wilson_z2: tuple[int, ...] | None
    chern: int | tuple[int, ...] | None
    direct_proved_min_eV: float | None = None  # noqa: N815
    classification: str | None = None
    indicator: tuple[int, ...] | None = None
    obstructed: bool | None = None


@dataclass(frozen=True, slots=True)
class NodeEntry:
    """One point, or one line with its images, at which the filled bands touch the rest.

    A point has charge, tilt, type and velocities; a line has length, winding and path. What does
    not apply is None or empty.
    """

    kind: str
    k: tuple[float, float, float]
    k_cart: tuple[float, float, float]
    energy_eV: float  # noqa: N815
    from_fermi_eV: float  # noqa: N815
    multiplicity: int
    chirality: int | None
    berry_phase_pi: float | None
    velocities_eV_ang: tuple[float, ...]  # noqa: N815
    velocities_m_s: tuple[float, ...]
    type: str
    tilt: float | None
    protection: str
    gap_around_meV: float  # noqa: N815
    orbit: int
    images: int
    length: float | None = None
    winding: tuple[int, int, int] | None = None
    energy_range_eV: tuple[float, float] | None = None  # noqa: N815
    path: tuple[tuple[float, float, float], ...] = ()


@dataclass(frozen=True, slots=True)
class NodeSearchEntry:
    """How complete the list of nodes is; fermi says what energies are measured from."""

    complete: bool
    reason: str
    gap_elsewhere_meV: float  # noqa: N815
    chirality_sum: int | None
    fermi_eV: float  # noqa: N815
    fermi: str
    unexplained: tuple[tuple[float, float, float], ...]


@dataclass(frozen=True, slots=True)
class RobustnessEntry:
    """radius_meV is half of the direct gap; `proved` says whether that gap is a proved bound.

    companion tells of the run without spin-orbit coupling, where one is named.
    """

    radius_meV: float | None  # noqa: N815
    errors_meV: Mapping[str, float | None]  # noqa: N815
    tipping: tuple[Mapping[str, Any], ...] = ()
    proved: bool = False
    companion: Mapping[str, Any] | None = None


@dataclass(frozen=True, slots=True)
class ConfidenceEntry:
    grade: str
    reasons: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class ProvenanceEntry:
    version: str
    packages: Mapping[str, str]
    settings: Mapping[str, Any]
    task_seconds: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class MendedEntry:
    """What the verdict would be were one cause mended and nothing else."""

    z2: tuple[int, ...] | None
    z4: int | None
    class_: str
    agreement: str
    gap_eV: float | None  # noqa: N815


@dataclass(frozen=True, slots=True)
class CauseEntry:
    """One possible cause of what is wrong, with its test.

    answer is "yes", "no" or "open"; weight, 0 to 1, orders them; consequence_of names the cause
    that explains this one, "" where none does.
    """

    cause: str
    answer: str
    weight: float
    test: str
    finding: str
    evidence: Mapping[str, Any]
    advice: str
    if_mended: MendedEntry | None
    consequence_of: str = ""


@dataclass(frozen=True, slots=True)
class DiagnosisEntry:
    """Why the verdict is in doubt; empty where it is not."""

    asked_because: str = ""
    causes: tuple[CauseEntry, ...] = ()


@dataclass(frozen=True, slots=True)
class Verdict:
    """All that is concluded about one case; see `as_dict` for the JSON form."""

    case: CaseEntry
    inputs: tuple[InputEntry, ...]
    electrons: ElectronsEntry
    gap: GapEntry
    time_reversal: TimeReversalEntry
    inversion: InversionEntry
    witnesses: WitnessesEntry
    invariants: InvariantsEntry
    agreement: str
    class_: str
    robustness: RobustnessEntry
    flags: tuple[Flag, ...]
    confidence: ConfidenceEntry
    measurable: Mapping[str, Any]
    provenance: ProvenanceEntry
    diagnosis: DiagnosisEntry = DiagnosisEntry()
    lower_gaps: tuple[LowerGapEntry, ...] | None = None
    nodes: tuple[NodeEntry, ...] | None = None
    node_search: NodeSearchEntry | None = None
    schema: str = SCHEMA

    def as_dict(self) -> dict[str, Any]:
        """The JSON document (plain dicts, lists, numbers and strings)."""
        plain = _plain(self)
        order = ["schema", *(f.name.rstrip("_") for f in fields(self) if f.name != "schema")]
        return {key: plain[key] for key in order}

    def _repr_html_(self) -> str:
        return notebook_html(self)


def _plain(value: Any) -> Any:
    if is_dataclass(value) and not isinstance(value, type):
        return {f.name.rstrip("_"): _plain(getattr(value, f.name)) for f in fields(value)}
    if isinstance(value, Mapping):
        return {str(k): _plain(v) for k, v in value.items()}
    if isinstance(value, tuple | list):
        return [_plain(v) for v in value]
    return value
