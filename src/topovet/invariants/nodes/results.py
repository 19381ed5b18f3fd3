"""What is known of the places where the gap closes."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import FloatArray, IntArray

POINT_KINDS = ("weyl", "dirac", "multifold", "accidental", "uncharacterised")
"""weyl: charge not zero. dirac: fourfold (twofold in a layer), charge zero, held by symmetry.
multifold: another number of bands, charge zero, held by symmetry. accidental: charge zero and no
symmetry found that holds it: a transition point, or a symmetry that was not tested.
uncharacterised: the charge could not be settled."""

Vector = tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class PointNode:
    """A point at which the filled bands touch the rest.

    Attributes
    ----------
    k
        Fractional, in (-1/2, 1/2].
    k_cart
        1/angstrom, 2 pi included.
    orbit
        Number of its orbit: symmetry of the Hamiltonian takes its nodes into each other.
    kind
        One of `POINT_KINDS`.
    gap_ev
        What is left of the gap there, eV.
    energy_ev, from_reference_ev
        Mean energy of the bands that touch, and relative to `NodeSearch.reference_ev`.
    multiplicity, n_filled
        Bands that touch, and how many of them are filled.
    charge
        Berry flux of the filled bands out of a surface around it, over 2 pi; None if not settled,
        and in a layer.
    berry_phase_pi
        In a layer: Berry phase around it, units of pi; else None.
    surface_radius, surface_gap_ev
        Longest half-axis of the surface (or loop), 1/angstrom, and the smallest gap on it: what
        the charge is safe from is half of that.
    velocities
        Principal velocities, eV angstrom, descending; one for each periodic direction.
    tilt
        Above 1: type II; None where the bands do not part linearly in every direction.
    protection
        What holds it, one clause; empty if nothing was found.
    """

    k: Vector
    k_cart: Vector
    orbit: int
    kind: str
    gap_ev: float
    energy_ev: float
    from_reference_ev: float
    multiplicity: int
    n_filled: int
    charge: int | None
    berry_phase_pi: float | None
    surface_radius: float
    surface_gap_ev: float
    velocities: tuple[float, ...]
    tilt: float | None
    protection: str

    @property
    def type(self) -> str:
        """ "I", "II", or "" where the bands do not part linearly in every direction."""
        if self.tilt is None:
            return ""
        return "II" if self.tilt > 1 else "I"


@dataclass(frozen=True, slots=True, eq=False)
class NodalLine:
    """A line along which the filled bands touch the rest.

    Attributes
    ----------
    k_frac
        (n, 3) points in order, fractional, not folded.
    n_images
        Lines that symmetry makes of it, itself counted.
    first_cart
        Its first point, 1/angstrom.
    closed
        Whether it comes back to its beginning modulo a reciprocal vector.
    winding
        That vector; (0, 0, 0) for a ring.
    length
        1/angstrom.
    energy_min_ev, energy_max_ev, from_reference_ev
        Energies along it, and the one that comes nearest to `NodeSearch.reference_ev`, relative to
        that.
    largest_gap_ev
        What is left of the gap on it.
    multiplicity
        Bands that touch.
    berry_phase_pi
        Around a small loop about it, units of pi; None if not settled.
    loop_gap_ev
        Smallest gap on that loop.
    held
        Whether a symmetry was found that holds it.
    protection
        What holds it, one clause; empty if nothing was found.
    """

    k_frac: FloatArray
    n_images: int
    first_cart: Vector
    closed: bool
    winding: tuple[int, int, int]
    length: float
    energy_min_ev: float
    energy_max_ev: float
    from_reference_ev: float
    largest_gap_ev: float
    multiplicity: int
    berry_phase_pi: float | None
    loop_gap_ev: float
    protection: str

    @property
    def held(self) -> bool:
        return bool(self.protection)


@dataclass(frozen=True, slots=True)
class Pocket:
    """Boxes that no bound settles and in which no closing was found.

    Attributes
    ----------
    k
        Where the gap is smallest, fractional.
    gap_ev
        The gap there: attained, not proved.
    """

    k: Vector
    gap_ev: float


@dataclass(frozen=True, slots=True)
class Reference:
    """The energy that nodes are measured from.

    Attributes
    ----------
    energy_ev
        eV.
    source
        "given" (a Fermi energy of the input) or "filling" (below it the mesh holds as many states
        as the filling).
    other_filling, other_gap_ev
        A filling near the one in use at which the mesh shows an insulator, and its indirect gap;
        None if there is none.
    """

    energy_ev: float
    source: str
    other_filling: int | None = None
    other_gap_ev: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class NodeSearch:
    """All closings of the gap at a filling, as far as they are known.

    Attributes
    ----------
    filling
        N: bands N-1 and N touch.
    points
        In the whole zone, by orbit.
    lines
        One of each orbit.
    pockets
        Open boxes without a closing, one for each cluster.
    elsewhere_ev
        Away from all of these the gap is proved to exceed this, eV; 0 where nothing is proved.
    complete
        Whether every open box belongs to a point or a line, and the charges add up to zero.
    reason
        Why not; empty if it is complete.
    charge_sum
        Sum of the charges of all points; None in a layer, or where one is not settled.
    reference
        See `Reference`.
    attained_ev, attained_k
        Smallest gap met, eV, and where; None if nothing was followed.
    degenerate
        The two bands touch everywhere: the search was not made.
    images
        (g, 3, 3) integers, k' = k @ image: symmetries that take the lines to the rest of them.
    n_open, n_solves
        Open boxes, eigenvalue problems.
    """

    filling: int
    points: tuple[PointNode, ...]
    lines: tuple[NodalLine, ...]
    pockets: tuple[Pocket, ...]
    elsewhere_ev: float
    complete: bool
    reason: str
    charge_sum: int | None
    reference: Reference
    attained_ev: float | None
    attained_k: Vector | None
    degenerate: bool
    images: IntArray
    n_open: int
    n_solves: int
