"""What is found about how far a Hamiltonian may move before its indices change."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.notation import significant

SHIFT, SCALE = "on-site shift", "spin-orbit scale"
BY_SPIN_PART, BY_COMPANION = "spin-dependent part of H", "spinless companion"
BY_PARITY, BY_GAP = "parity at the TRIM", "gap closing and Wilson loops"

DOUBTFUL_EV = 1e-3
"""Sampled gaps below this are too small to be called open."""

SAME_K = 1e-3

OUTCOMES = ("flips", "exchange", "reopens", "closes", "holds", "open")


@dataclass(frozen=True, slots=True)
class TippingPoint:
    """One parameter turned in one direction until something happens.

    Attributes
    ----------
    parameter
        `SHIFT` of a group of orbitals, in eV, or `SCALE` of spin-orbit coupling, a factor.
    group, against
        The orbitals that move, and those that stay; "" for the scale.
    direction
        "up" or "down".
    method
        `BY_PARITY` or `BY_GAP`.
    outcome
        "flips": Z2, Z4 or mirror Chern numbers are others beyond `critical`; "exchange": states of
        opposite parity change places there, Z2 and Z4 stay, and nothing else is known; "reopens":
        the gap closes there, or states are exchanged, and what was counted beyond is as before;
        "closes": the direct gap closes there, somewhere, and no index beyond is known; "holds":
        nothing of the kind up to `searched_to`; "open": not settled beyond `searched_to`.
    critical
        Shift in eV, or factor, at which it happens; None for "holds" and "open".
    searched_to
        Shift in eV, or factor, up to which was looked.
    k
        Where: the TRIM of the exchange, or the k at which the gap closes.
    n_exchanged
        Odd filled states gained at each of these k; None where they differ or parity does not
        speak.
    z2_before, z2_after, z4_before, z4_after
        Indices on the two sides; None where they are not known.
    mirror_before, mirror_after
        (plane, mirror Chern number) on the two sides, counted only where Z2 and Z4 stay; None
        where they were not counted.
    gap_on_the_way_ev, gap_on_the_way_k
        Smallest direct gap sampled at a quarter, half and three quarters of the way to an exchange
        at the TRIM, and where; None where it was not sampled.
    spread
        How far apart these k change, in the unit of `critical`: those of one star would at once
        if H had all of the crystal's symmetry.
    note
        What else is to be said, one clause, or "".
    """

    parameter: str
    group: str
    against: str
    direction: str
    method: str
    outcome: str
    critical: float | None
    searched_to: float
    k: tuple[tuple[float, float, float], ...] = ()
    n_exchanged: int | None = None
    z2_before: tuple[int, ...] | None = None
    z2_after: tuple[int, ...] | None = None
    z4_before: int | None = None
    z4_after: int | None = None
    mirror_before: tuple[tuple[str, int], ...] | None = None
    mirror_after: tuple[tuple[str, int], ...] | None = None
    gap_on_the_way_ev: float | None = None
    gap_on_the_way_k: tuple[float, float, float] | None = None
    spread: float | None = None
    note: str = ""

    def __post_init__(self) -> None:
        if self.outcome not in OUTCOMES:
            raise ValueError(f"unknown outcome {self.outcome!r}")

    def value_text(self, value: float) -> str:
        """A value of the parameter with its unit, for notes."""
        unit = "" if self.parameter == SCALE else " eV"
        return f"{significant(value)}{unit}"

    @property
    def may_close_before(self) -> bool:
        """Whether a gap on the way is too small to be told from none, off the TRIM exchanged."""
        at, gap = self.gap_on_the_way_k, self.gap_on_the_way_ev
        if at is None or gap is None or gap >= DOUBTFUL_EV:
            return False
        return all(_apart(at, k) for k in self.k)

    @property
    def distance_mev(self) -> float | None:
        """Size of a critical shift, meV; None for the scale and where nothing happens."""
        if self.parameter != SHIFT or self.critical is None:
            return None
        return 1000.0 * abs(self.critical)


def _apart(one: tuple[float, ...], other: tuple[float, ...]) -> bool:
    """Whether two k differ by more than a reciprocal lattice vector."""
    return any(abs((a - b + 0.5) % 1.0 - 0.5) > SAME_K for a, b in zip(one, other, strict=True))


@dataclass(frozen=True, slots=True)
class TippingSearch:
    """All parameters that were turned.

    Attributes
    ----------
    points
        One for each parameter and direction.
    not_asked
        What was left out and why, one clause each.
    spin_orbit_ev
        Atomic spin-orbit coupling: spectral norm of the spin-dependent part within the sites, eV;
        None where it was not looked at.
    spin_hopping_ratio
        Spin-dependent over spin-independent hopping, root mean square.
    n_solves
        Eigenvalue problems.
    scale_from
        What the scale turns: `BY_SPIN_PART`, or `BY_COMPANION` where the part is H less a run
        without spin-orbit coupling.
    """

    points: tuple[TippingPoint, ...]
    not_asked: tuple[str, ...]
    spin_orbit_ev: float | None
    spin_hopping_ratio: float | None
    n_solves: int
    scale_from: str = BY_SPIN_PART
