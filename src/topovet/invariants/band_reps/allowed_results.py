"""Which topological invariants a group can have, and which values indicators leave to them."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.model.plane import Cell

FIXED = "fixed"
MODULO = "modulo"
OPEN = "open"

STRONG = "strong index"
WEAK = "weak indices"
MIRROR = "mirror Chern number"
LAYERS = "layers on the mirror"
ROTATION = "rotation invariant"
SCREW = "screw invariant"
GLIDE = "glide invariant"
INVERSION = "inversion invariant"
S4 = "S4 invariant"

Point3 = tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class PlaneResidue:
    """A mirror Chern number modulo n that rotation eigenvalues give.

    Attributes
    ----------
    row, half
        The plane k.row = 0, or 1/2 with `half`.
    axis_cart
        The plane is counter-clockwise about it.
    through
        A point on the mirror that is meant, fractional.
    n, value
        C modulo n.
    """

    row: Cell
    half: bool
    axis_cart: Point3
    through: Point3
    n: int
    value: int


@dataclass(frozen=True, slots=True)
class IndicatorValues:
    """Symmetry indicators of a set of bands with spin and time reversal; None where not known.

    Attributes
    ----------
    strong, weak
        nu0 and (nu1, nu2, nu3) as far as indicators give them.
    strong_from
        Which indicator gives nu0, in words.
    z4, centre
        kappa modulo 4 about an inversion centre, fractional.
    z8, z8_centre, z8_axis
        kappa_1 - 2 kappa_4 modulo 8 about a common centre of inversion and S4, and the unit vector
        of that S4.
    planes
        Mirror Chern numbers modulo n.
    """

    strong: int | None = None
    weak: Cell | None = None
    strong_from: str = ""
    z4: int | None = None
    centre: Point3 | None = None
    z8: int | None = None
    z8_centre: Point3 | None = None
    z8_axis: Point3 | None = None
    planes: tuple[PlaneResidue, ...] = ()


@dataclass(frozen=True, slots=True)
class AllowedValues:
    """A set of values.

    Attributes
    ----------
    status
        "fixed", "modulo" (integers known modulo n) or "open".
    allowed
        Residues, values of an index modulo 2, or triples of weak indices; () for any integer.
    modulus
        n of the residues; None where the values are meant as they stand.
    """

    status: str
    allowed: tuple[int, ...] | tuple[Cell, ...]
    modulus: int | None = None

    def holds(self, number: int) -> bool:
        """Whether an integer is among them."""
        if not self.allowed:
            return True
        return (number if self.modulus is None else number % self.modulus) in self.allowed


@dataclass(frozen=True, slots=True)
class AllowedInvariant:
    """One invariant of the group.

    Attributes
    ----------
    kind
        One of the names above.
    operation
        The operation that protects it, one of each class; empty for time reversal alone.
    planes
        Names of the plane of k it belongs to and of those that the group makes of it.
    values
        What the indicators leave.
    source
        Why, in one clause.
    """

    kind: str
    operation: str
    planes: tuple[str, ...]
    values: AllowedValues
    source: str


@dataclass(frozen=True, slots=True)
class AllowedInvariants:
    """The list for one case.

    Attributes
    ----------
    status
        "ok", or "failed" where no phase has these values together.
    reason
        Why it is not "ok"; empty otherwise.
    invariants
        One entry for each class of operations.
    combinations
        Sets of values that occur together, in the order of `invariants`; empty where there is only
        one set, or so many that they say nothing.
    planes
        Mirror Chern numbers allowed on every plane of k, images included, by name.
    """

    status: str
    reason: str
    invariants: tuple[AllowedInvariant, ...] = ()
    combinations: tuple[tuple[AllowedValues, ...], ...] = ()
    planes: tuple[tuple[str, AllowedValues], ...] = ()
