"""How bands connect along the band path."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.invariants.band_reps.results import Point3


@dataclass(frozen=True, slots=True)
class EndLevel:
    """A level at a special point.

    Attributes
    ----------
    label
        Its irrep as the table of irreps has it; "?" where that is not resolved, "" where the point
        is not in it.
    first_band, n_bands
        Bands first_band … first_band + n_bands - 1, counted from 0.
    energy_ev
        Its energy.
    """

    label: str
    first_band: int
    n_bands: int
    energy_ev: float


@dataclass(frozen=True, slots=True)
class LevelConnection:
    """A level of the line and the levels of the end points that it runs between.

    Attributes
    ----------
    kind, n_bands
        Label of its irrep on the line, and its bands.
    start, end
        Levels of the end points that it belongs to.
    approach_mev
        Its least distance to the next level of the same kind; None without one.
    settled
        Whether that distance is beyond what H breaks of the line's symmetry.
    """

    kind: str
    n_bands: int
    start: EndLevel
    end: EndLevel
    approach_mev: float | None
    settled: bool


@dataclass(frozen=True, slots=True)
class LevelCrossing:
    """Two levels of different kinds that meet next to the filling.

    Attributes
    ----------
    k_frac, energy_ev
        Where; the k is a fractional one on the segment.
    first_band, n_bands
        The bands of both, counted from 0.
    kinds
        Label of the one that is lower towards the start of the segment, then of the other.
    place
        "filled" for the two highest filled levels, "empty" for the two lowest empty ones, "across"
        where the filling lies between or within the two.
    splitting_mev
        Spread of these bands there in H as it is, broken symmetry included.
    """

    k_frac: Point3
    energy_ev: float
    first_band: int
    n_bands: int
    kinds: tuple[str, str]
    place: str
    splitting_mev: float


@dataclass(frozen=True, slots=True)
class PathSegment:
    """One straight piece of the band path.

    Attributes
    ----------
    start, end, k_start, k_end
        Names and (3,) fractional coordinates of its ends.
    symmetry
        Point group of the k on it.
    kinds
        Labels of the levels that occur on it; where there is one kind only, levels do not cross.
    error_mev
        Largest difference, among the bands next to the filling, between the energies of H and of
        the blocks that the line's irreps make of it.
    connections
        Levels that are among the two below and two above the filling at either end.
    crossings
        Next to the filling, from the start on.
    """

    start: str
    end: str
    k_start: Point3
    k_end: Point3
    symmetry: str
    kinds: tuple[str, ...]
    error_mev: float
    connections: tuple[LevelConnection, ...]
    crossings: tuple[LevelCrossing, ...]


@dataclass(frozen=True, slots=True)
class PathConnections:
    """All pieces of the band path.

    Attributes
    ----------
    n_operations
        Unitary operations by which levels are told apart.
    segments
        In the order of the path.
    """

    n_operations: int
    segments: tuple[PathSegment, ...]

    @property
    def crossings(self) -> tuple[tuple[PathSegment, LevelCrossing], ...]:
        """All of them, each with its segment."""
        return tuple((s, crossing) for s in self.segments for crossing in s.crossings)
