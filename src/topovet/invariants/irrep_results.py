"""What band irreps say, point by point."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import FloatArray
from topovet.symmetry.irrep_names import IrrepName


@dataclass(frozen=True, slots=True)
class IrrepContent:
    """How often each irrep occurs in a set of bands.

    Attributes
    ----------
    multiplicities
        One for each irrep of the point: weight of the bands in it over its dimension; whole numbers
        for an exact symmetry.
    counts
        The whole numbers that are read, by eigenvalues of the projectors onto the irreps.
    purity
        Smallest |2p - 1| over all irreps and all eigenvalues p, 0 <= p <= 1, of their projectors in
        the set of bands: 1 for an exact symmetry, 0 where a state is half inside an irrep. For two
        irreps that differ in parity it is the smallest |parity|.
    resolved
        The purity is at least `MIN_PURITY`, and the counts fit the number of bands.
    """

    multiplicities: tuple[float, ...]
    counts: tuple[int, ...]
    purity: float
    resolved: bool


@dataclass(frozen=True, slots=True)
class LevelIrreps:
    """One level: bands that symmetry keeps together.

    Attributes
    ----------
    first_band, n_bands
        Bands first_band … first_band + n_bands - 1, counted from 0.
    energy_ev, spread_mev
        Mean energy, and the splitting left by broken symmetry.
    label
        Own label, irreps that the level joins written with "⊕"; "?" where not resolved.
    textbook
        The textbook's name, None where one of its irreps has none.
    content
        Counts and purity.
    """

    first_band: int
    n_bands: int
    energy_ev: float
    spread_mev: float
    label: str
    textbook: str | None
    content: IrrepContent


@dataclass(frozen=True, slots=True, eq=False)
class PointIrreps:
    """Irreps of the bands at one high-symmetry k.

    Attributes
    ----------
    point
        Its name.
    k_frac
        (3,) fractional.
    star
        (n_star, 3) the k that are equivalent to it.
    is_trim
        2k is a reciprocal lattice vector.
    group_order, n_antiunitary
        Unitary and antiunitary operations of the little group.
    irreps
        All irreps of the little group, in the order of the counts.
    levels
        All levels, lowest first.
    occupied
        Content of the occupied bands; None without a filling.
    gap_ev
        E[N] - E[N-1] here; None without a filling or without empty bands.
    n_plus, n_minus
        Occupied states of even and odd parity; None without inversion in the little group, or
        where `occupied` is not resolved.
    residual_mev
        Largest spectral norm of D H D† - H over the little group.
    moved_mev
        Spectral norm of the difference between H and its average over the little group, which
        decides which bands form a level.
    """

    point: str
    k_frac: FloatArray
    star: FloatArray
    is_trim: bool
    group_order: int
    n_antiunitary: int
    irreps: tuple[IrrepName, ...]
    levels: tuple[LevelIrreps, ...]
    occupied: IrrepContent | None
    gap_ev: float | None
    n_plus: int | None
    n_minus: int | None
    residual_mev: float
    moved_mev: float
