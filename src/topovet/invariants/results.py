"""What the witnesses say."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import FloatArray, IntArray


@dataclass(frozen=True, slots=True)
class TrimParity:
    """Parities at one TRIM.

    Attributes
    ----------
    k
        Fractional, entries 0 or 1/2.
    n_plus, n_minus
        Occupied states of even and odd parity, Kramers partners counted singly.
    delta
        Product of one parity per Kramers pair; without time reversal or spin, of all parities.
    purity
        Smallest |eigenvalue| of inversion in the occupied space; 1 for an exact symmetry.
    gap_ev
        E[N] - E[N-1] here.
    violation_mev
        Spectral norm of the commutator-like residual P H P^-1 - H here.
    level_energies_ev, level_parities
        One entry for each Kramers pair (or single level without time reversal) of ALL bands,
        lowest first; the parity is the mean eigenvalue of P in the level, near +1 or -1.
    """

    k: tuple[float, float, float]
    n_plus: int
    n_minus: int
    delta: int
    purity: float
    gap_ev: float
    violation_mev: float
    level_energies_ev: tuple[float, ...]
    level_parities: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class ParityWitness:
    """Fu-Kane indices and inversion indicators.

    Attributes
    ----------
    status
        "ok", "not-applicable" or "failed".
    reason
        Why it is not "ok"; empty otherwise.
    z2
        (nu0, nu1, nu2, nu3), (nu,) in 2D; None without time reversal or spin.
    z4
        kappa mod 4 in 3D with time reversal and spin, for `centre`.
    kappa
        kappa itself.
    eta4
        sum of n_minus over the TRIM mod 4, without time reversal.
    centre
        Inversion centre the counts refer to.
    kappa_by_centre
        (centre, kappa mod 4) for each of the inversion centres of the cell; shows whether z4
        depends on the choice, as it does for weak phases.
    """

    status: str
    reason: str
    z2: tuple[int, ...] | None
    z4: int | None
    kappa: int | None
    eta4: int | None
    centre: tuple[float, float, float] | None
    trim: tuple[TrimParity, ...]
    kappa_by_centre: tuple[tuple[tuple[float, float, float], int], ...]


@dataclass(frozen=True, slots=True, eq=False)
class WilsonPlane:
    """Z2 of a time-reversal-invariant plane, and the flow of hybrid Wannier centres it rests on.

    Attributes
    ----------
    plane
        "k1=0" and so on; `across` and `along` are the reciprocal lattice vectors that the lines
        are swept across and closed along.
    status
        "ok" or "unresolved".
    reason
        Why it is not "ok"; empty otherwise.
    z2
        0 or 1; None unless "ok".
    lines
        Lines on half of the plane, both ends included.
    points_per_line
        Most points that a line needed.
    smallest_gap
        Smallest of the followed gaps between centres, in lattice periods.
    smallest_singular_value
        Of all overlaps between neighbouring k on a line.
    smallest_direct_gap_ev, narrowest_k
        Smallest E[N] - E[N-1] met on the plane and its fractional k: an upper bound of the true
        one.
    kramers_splitting
        Largest distance within Kramers pairs of centres at the two ends, in lattice periods.
    n_solves
        Eigenvalue problems solved.
    flow_across
        (lines,) coordinate of each line, 0 to 1/2.
    flow_hwcc
        (lines, n_occ) centres in [0, 1), ascending on each line.
    gap_centres
        (lines,) middle of the largest gap between centres.
    references, crossings
        (n,) reference values and how often the centres cross each of them.
    reversal_loss
        Largest |1 - M†M| between time-reversed states and those solved for at -k: 0 where time
        reversal holds, NaN where it was not tried.
    """

    plane: str
    across: tuple[int, int, int]
    along: tuple[int, int, int]
    status: str
    reason: str
    z2: int | None
    lines: int
    points_per_line: int
    smallest_gap: float
    smallest_singular_value: float
    smallest_direct_gap_ev: float
    narrowest_k: tuple[float, float, float]
    kramers_splitting: float
    n_solves: int
    flow_across: FloatArray
    flow_hwcc: FloatArray
    gap_centres: FloatArray
    references: FloatArray
    crossings: IntArray
    reversal_loss: float = float("nan")


@dataclass(frozen=True, slots=True, eq=False)
class WilsonWitness:
    """Z2 indices from Wilson loops.

    Attributes
    ----------
    status
        "ok", "not-applicable", "unresolved" (a budget ended, or a gap closes on a plane) or
        "failed" (the planes contradict each other).
    reason
        Why it is not "ok"; empty otherwise.
    z2
        (nu0, nu1, nu2, nu3), (nu,) in 2D; None unless "ok".
    nu0_determinations
        nu0 from the pair of planes of each direction, None where one of them is open; three
        entries in 3D, one in 2D.
    planes
        The planes that were solved.
    assumed_equal
        (plane, plane it was taken from) for planes that symmetry saved from being solved.
    n_solves
        Eigenvalue problems solved.
    """

    status: str
    reason: str
    z2: tuple[int, ...] | None
    nu0_determinations: tuple[int | None, ...]
    planes: tuple[WilsonPlane, ...]
    assumed_equal: tuple[tuple[str, str], ...]
    n_solves: int


@dataclass(frozen=True, slots=True, eq=False)
class ChernPlane:
    """Chern number of a plane, by two counts.

    Attributes
    ----------
    plane, across, along
        As in `WilsonPlane`; the sign belongs to the orientation (across, along).
    status
        "ok" or "unresolved".
    reason
        Why it is not "ok"; empty otherwise.
    chern
        The integer; None unless "ok".
    winding
        From the winding of the sum of hybrid Wannier centres; None if it was not reached.
    plaquettes
        From the Berry flux through plaquettes between neighbouring lines; likewise.
    largest_flux
        Largest |flux| through a plaquette, radians; below pi the count is an integer.
    lines, points_per_line, smallest_singular_value, smallest_direct_gap_ev, narrowest_k, n_solves
        As in `WilsonPlane`, the lines covering the whole plane.
    flow_across, flow_hwcc
        (lines,) and (lines, n_occ), the line at 1 being that at 0.
    """

    plane: str
    across: tuple[int, int, int]
    along: tuple[int, int, int]
    status: str
    reason: str
    chern: int | None
    winding: int | None
    plaquettes: int | None
    largest_flux: float
    lines: int
    points_per_line: int
    smallest_singular_value: float
    smallest_direct_gap_ev: float
    narrowest_k: tuple[float, float, float]
    n_solves: int
    flow_across: FloatArray
    flow_hwcc: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class ChernWitness:
    """Chern numbers of the occupied bands.

    Attributes
    ----------
    status
        "ok", "unresolved", or "failed" where parallel planes differ: then the gap closes between
        them (Weyl points).
    reason
        Why it is not "ok"; empty otherwise.
    chern
        (C,) in 2D, (C1, C2, C3) in 3D, C_i being that of planes k_i = const with the other two
        directions in cyclic order; None unless "ok".
    by_direction
        For each direction the (offset, Chern number or None) of its planes.
    planes
        All planes solved.
    n_solves
        Eigenvalue problems solved.
    """

    status: str
    reason: str
    chern: tuple[int, ...] | None
    by_direction: tuple[tuple[tuple[float, int | None], ...], ...]
    planes: tuple[ChernPlane, ...]
    n_solves: int


@dataclass(frozen=True, slots=True, eq=False)
class MirrorChern:
    """Mirror Chern number of one mirror-invariant plane.

    Attributes
    ----------
    plane
        Its name.
    status
        "ok", "unresolved", "failed", or "not-applicable" (no mirror of spinors, D^2 is not -1).
    reason
        Why it is not "ok"; empty otherwise.
    mirror_chern
        (C+ - C-)/2; None unless "ok". The sign changes with the orientation of the plane and with
        the sign convention of the spin rotation.
    plus, minus
        Chern numbers of the occupied states with mirror eigenvalue +i and -i; None if not reached.
    n_plus, n_minus
        Occupied states in each.
    purity
        Smallest |eigenvalue| of the mirror in the occupied space.
    violation_mev
        Largest |D H D^-1 - H| met, spectral norm.
    n_solves
        Eigenvalue problems solved.
    closes_near
        A k at which the numbers of states differ from those elsewhere on the plane although the
        mirror holds: the gap closes in between. None where no such k was met.
    """

    plane: str
    status: str
    reason: str
    mirror_chern: float | None
    plus: ChernPlane | None
    minus: ChernPlane | None
    n_plus: int
    n_minus: int
    purity: float
    violation_mev: float
    n_solves: int
    closes_near: tuple[float, float, float] | None = None
