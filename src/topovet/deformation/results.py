"""What a walk from one Hamiltonian to another finds; lambda is 0 at the first and 1 at the second.

Everything that is called attained was met and is an upper bound of the true minimum; what is called
proved holds at every k and at every lambda of the range named.
"""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import FloatArray

Point = tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class Comparison:
    """On what grounds two Hamiltonians count as written in the same functions.

    Attributes
    ----------
    overlap
        Re tr(H_A† H_B)/(|H_A| |H_B|) over all R, without the diagonal of R = 0: 1 for equal ones.
    function_overlaps
        The same for the row of each Wannier function; NaN where it couples to nothing.
    least_function
        Position of the smallest of them, 0-based.
    functions
        "declared" where both declare the same orbitals, else why only the overlap speaks.
    n_common, n_union
        R vectors that both have, and that at least one has.
    stretches
        Principal stretches of the cell from A to B.
    rotation_deg
        Angle by which the cell of B is turned against that of A.
    displacement_ang
        Largest move of a site within the cell, angstrom; None without declared sites.
    substitutions
        Species that differ on equal sites, e.g. "Bi -> Sb".
    spin_added
        "A" or "B" where that one is spinless and was taken twice; else "".
    """

    overlap: float
    function_overlaps: tuple[float, ...]
    least_function: int
    functions: str
    n_common: int
    n_union: int
    stretches: Point
    rotation_deg: float
    displacement_ang: float | None
    substitutions: tuple[str, ...]
    spin_added: str

    @property
    def least_overlap(self) -> float:
        return self.function_overlaps[self.least_function]


@dataclass(frozen=True, slots=True)
class Averaging:
    """What averaging one end over the symmetries that both share did to it.

    Attributes
    ----------
    n_operations
        Unitary operations, the identity counted.
    moved_mev
        Spectral norm of the change of H(k), largest over the sampled k.
    levels_moved_mev
        Largest change there of the highest filled and the lowest empty level.
    """

    n_operations: int
    moved_mev: float
    levels_moved_mev: float


@dataclass(frozen=True, slots=True)
class GapSampleAt:
    """Smallest direct gap met at one lambda, eV, and its k (fractional)."""

    lam: float
    gap_ev: float
    k: Point


@dataclass(frozen=True, slots=True)
class ParityExchange:
    """Levels of opposite parity that change places at a TRIM.

    Attributes
    ----------
    lam
        Where, to 1e-9: a root of the difference of two levels, each in its own parity sector.
    k
        The TRIM.
    n_minus_before, n_minus_after
        Occupied odd states on either side, counted singly.
    energy_ev
        Energy of the two levels where they meet.
    """

    lam: float
    k: Point
    n_minus_before: int
    n_minus_after: int
    energy_ev: float


@dataclass(frozen=True, slots=True)
class Closing:
    """A place on the way where the direct gap vanishes.

    Attributes
    ----------
    kind
        "point": the gap vanishes at one lambda and opens again. "interval": it is closed over a
        range of lambda.
    lam
        Where it vanishes; the middle of an interval.
    lo, hi
        Attained gaps are below `GAPLESS_EV` from lo to hi.
    k
        Where the gap is smallest at `lam`.
    gap_ev
        What was attained there.
    exchanges
        Parity exchanges at the TRIM within [lo, hi].
    """

    kind: str
    lam: float
    lo: float
    hi: float
    k: Point
    gap_ev: float
    exchanges: tuple[ParityExchange, ...]


@dataclass(frozen=True, slots=True)
class ProvedStretch:
    """A range of lambda over which the direct gap was bounded at every k.

    Attributes
    ----------
    lo, hi
        The range.
    proved_min_ev
        The direct gap is nowhere smaller for lambda in [lo, hi]; 0 where nothing was shown.
    attained_ev
        Smallest gap met in the range, or on straight lines between values met.
    """

    lo: float
    hi: float
    proved_min_ev: float
    attained_ev: float


@dataclass(frozen=True, slots=True)
class SideIndices:
    """Indices of the occupied bands at one lambda, by independent witnesses.

    Attributes
    ----------
    lam
        Where they were computed.
    parity_z2, z4, eta4
        From parities at the TRIM; None where they do not apply or failed.
    wilson_z2
        From Wilson loops; None likewise.
    chern
        Chern numbers where time reversal is broken; None likewise.
    notes
        Why a witness gave nothing.
    agreement
        "agree", "one-witness", "disagree" or "none".
    """

    lam: float
    parity_z2: tuple[int, ...] | None
    z4: int | None
    eta4: int | None
    wilson_z2: tuple[int, ...] | None
    chern: tuple[int, ...] | None
    notes: tuple[str, ...]
    agreement: str

    @property
    def z2(self) -> tuple[int, ...] | None:
        """Z2 indices that no witness contradicts; None where two disagree or none speaks."""
        if self.agreement == "disagree":
            return None
        return self.parity_z2 if self.wilson_z2 is None else self.wilson_z2

    @property
    def signature(self) -> tuple[tuple[int, ...] | None, int | None, tuple[int, ...] | None]:
        """All that is compared from side to side: Z2, the inversion indicator, Chern numbers."""
        indicator = None if self.agreement == "disagree" else self.z4
        return self.z2, self.eta4 if indicator is None else indicator, self.chern


@dataclass(frozen=True, slots=True)
class Segment:
    """A range of lambda between closings.

    Attributes
    ----------
    lo, hi
        The range.
    sides
        Indices at one lambda of it or more; the same wherever the gap stays open.
    proved_share
        Part of it over which the gap is proved to stay open.
    """

    lo: float
    hi: float
    sides: tuple[SideIndices, ...]
    proved_share: float

    @property
    def consistent(self) -> bool:
        """Whether no two sides say different things of what both know."""
        pairs = zip(*(side.signature for side in self.sides), strict=True)
        return all(len({value for value in known if value is not None}) < 2 for known in pairs)

    @property
    def indices(self) -> SideIndices | None:
        """What holds all over the segment; None where witnesses or sides contradict each other."""
        if not self.consistent or any(side.agreement == "disagree" for side in self.sides):
            return None
        return self.sides[0]


@dataclass(frozen=True, slots=True, eq=False)
class TrimLevels:
    """Levels at one TRIM along the way, for display.

    Attributes
    ----------
    k
        The TRIM.
    lams
        (n,).
    even_ev, odd_ev
        (n, n_even) and (n, n_odd) levels of either parity, ascending.
    edges_ev
        (n, 2) highest filled and lowest empty level.
    """

    k: Point
    lams: FloatArray
    even_ev: FloatArray
    odd_ev: FloatArray
    edges_ev: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class Walk:
    """The whole way from A to B.

    Attributes
    ----------
    comparison
        Why A and B may be mixed.
    filling
        Occupied bands, spin counted.
    samples
        Smallest direct gaps met, by ascending lambda.
    closings
        In order; empty where none was found.
    exchanges
        Every parity exchange at a TRIM; empty without inversion.
    exchange_note
        Why there are none to look for; empty where inversion holds at both ends.
    stretches
        Ranges over which the gap was bounded, in order.
    n_solves
        Eigenvalue problems that the bounds took.
    proof_note
        Why nothing was proved, or what is open; empty where the whole of every segment is proved
        but for less than `resolution` beside a closing.
    resolution
        Width of lambda that the proof leaves beside a closing.
    segments
        Open ranges between the closings, with their indices.
    levels
        Levels at each TRIM with an exchange, else at the TRIM with the smallest gap.
    time_reversal, inversion
        Whether both ends have it, in the same representation; then it was made exact.
    averagings
        What that did to A and to B.
    mesh
        Points of the mesh that each search started from.
    effort
        "quick", "standard" or "thorough".
    """

    comparison: Comparison
    filling: int
    samples: tuple[GapSampleAt, ...]
    closings: tuple[Closing, ...]
    exchanges: tuple[ParityExchange, ...]
    exchange_note: str
    stretches: tuple[ProvedStretch, ...]
    n_solves: int
    proof_note: str
    resolution: float
    segments: tuple[Segment, ...]
    levels: tuple[TrimLevels, ...]
    time_reversal: bool
    inversion: bool
    averagings: tuple[Averaging, Averaging]
    mesh: tuple[int, int, int]
    effort: str

    @property
    def proved_throughout(self) -> bool:
        """Whether the gap is proved to stay open from A to B."""
        return not self.closings and _cover(self.stretches) >= 1 - 1e-12

    @property
    def proved_share(self) -> float:
        """Part of [0, 1] over which the gap is proved to be open."""
        return _cover(self.stretches)


def _cover(stretches: tuple[ProvedStretch, ...]) -> float:
    return sum(s.hi - s.lo for s in stretches if s.proved_min_ev > 0)
