"""What band representations say about sets of bands."""

from __future__ import annotations

from dataclasses import dataclass

STABLE = "stable"
FRAGILE = "fragile"
ATOMIC = "sum of atomic limits"
NOT_GAPPED = "not a gapped band structure"
UNRESOLVED = "unresolved"

Point3 = tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class AtomicLimit:
    """Orbitals on one Wyckoff position whose bands are part of a set.

    Attributes
    ----------
    site, n_sites
        One of the sites, fractional in the Hamiltonian's cell, and their number per cell.
    site_symmetry
        Point group of the site, e.g. "-43m".
    orbital
        Own label of the corepresentation of that group: dimension, letter, parity.
    n_bands
        Bands of it per copy.
    copies
        How often it occurs.
    on_atoms
        Whether atoms sit there.
    """

    site: Point3
    n_sites: int
    site_symmetry: str
    orbital: str
    n_bands: int
    copies: int
    on_atoms: bool


@dataclass(frozen=True, slots=True)
class PointColumns:
    """One maximal k stratum and what can occur there.

    Attributes
    ----------
    name, k_frac
        Name of the band path, or the coordinates; the k itself.
    freedom
        Dimension of the stratum: 0 for a point, 1 where a whole line is as good.
    labels
        Labels of the levels, one for each corepresentation.
    dimensions
        Bands in one level of each.
    """

    name: str
    k_frac: Point3
    freedom: int
    labels: tuple[str, ...]
    dimensions: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class BandSet:
    """One set of bands that gaps set apart.

    Attributes
    ----------
    first_band, n_bands
        Bands first_band … first_band + n_bands - 1, counted from 0.
    classification
        "stable", "fragile", "sum of atomic limits", "not a gapped band structure" or "unresolved".
    reason
        Why it is unresolved or not gapped; empty otherwise.
    indicator
        Class in the indicator group; None where there is none.
    multiplicities
        For each point, how often each corepresentation occurs; () where unresolved.
    atomic_limits
        Orbitals that make the same multiplicities, on atoms where that is possible; one choice of
        perhaps several.
    obstructed
        Whether orbitals on the atoms cannot make them but others can; None where not asked.
    crossings
        Lines on which levels must cross, with what crosses there.
    z2
        Z2 indices that the multiplicities fix, None at the others.
    purity
        Least purity with which the levels were read.
    """

    first_band: int
    n_bands: int
    classification: str
    reason: str
    indicator: tuple[int, ...] | None
    multiplicities: tuple[tuple[int, ...], ...]
    atomic_limits: tuple[AtomicLimit, ...]
    obstructed: bool | None
    crossings: tuple[str, ...]
    z2: tuple[int | None, ...]
    purity: float | None


@dataclass(frozen=True, slots=True)
class LineLevels:
    """Levels of the occupied bands on a line of symmetry between two maximal strata.

    Attributes
    ----------
    start, end
        Names of the two.
    k_start, k_end
        (3,) fractional, the ends of a straight line.
    symmetry
        Point group of the line, e.g. "3m".
    levels, counts
        Labels of its levels and how often each occurs, all along the line.
    """

    start: str
    end: str
    k_start: Point3
    k_end: Point3
    symmetry: str
    levels: tuple[str, ...]
    counts: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class BandRepWitness:
    """Band representations as a witness of the occupied bands, and of the other isolated sets.

    Attributes
    ----------
    status
        "ok" or "failed"; "failed" where the occupied levels cannot be read.
    reason
        Why it is not "ok"; empty otherwise.
    group
        Number and symbol of the group that was used, "216 (F-43m)" or, of a layer, "72 (p-3m1)".
    spinful
        Whether the levels are those of electrons with spin.
    n_operations, n_structure
        Operations in it, and in that of the structure.
    indicator_group
        Orders of its cyclic factors; () for the trivial group.
    n_band_representations
        Number of band representations of maximal Wyckoff positions.
    points
        The maximal k strata.
    occupied
        The occupied bands.
    lines
        Levels of the occupied bands on the lines that connect the points; empty where they cannot
        be connected or no line has more than the identity.
    sets
        Sets of bands between gaps, lowest first; empty where only the occupied ones are isolated.
    dimension
        3 with a space group, 2 with a layer group.
    below
        The lowest bands up to each gap below the filling between these sets, fewest first.
    """

    status: str
    reason: str
    group: str
    spinful: bool
    n_operations: int
    n_structure: int
    indicator_group: tuple[int, ...]
    n_band_representations: int
    points: tuple[PointColumns, ...]
    occupied: BandSet
    lines: tuple[LineLevels, ...] = ()
    sets: tuple[BandSet, ...] = ()
    dimension: int = 3
    below: tuple[BandSet, ...] = ()
