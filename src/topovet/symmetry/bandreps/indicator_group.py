"""Band representations of a space group, and the group that indicates what they cannot make.

Rows of E are the band representations, columns the corepresentations at the maximal k strata. With
U E V = D, the vector of multiplicities v of any set of bands becomes y = v V: entries beyond the
rank must vanish for bands that are gapped everywhere, and the others modulo the divisors d_j tell
v apart from all sums and differences of atomic limits. The generators that a Smith form picks are
not canonical; published formulas name the classes.

References
----------
Po, Vishwanath, Watanabe, Nat. Commun. 8, 50 (2017), doi:10.1038/s41467-017-00133-2.
Bradlyn et al., Nature 547, 298 (2017), doi:10.1038/nature23268.
"""

from __future__ import annotations

import functools
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import FloatArray, IntArray, frozen
from topovet.symmetry.bandreps.compatibility import Relation, find_relations
from topovet.symmetry.bandreps.corepresentations import CorepTable, find_coreps
from topovet.symmetry.bandreps.double_group import (
    DoubleGroup,
    build_double_group,
    little_group_at,
)
from topovet.symmetry.bandreps.induction import SiteOrbit, place_on_orbit
from topovet.symmetry.bandreps.layers import Layer, exact_translations, strata_of_layer
from topovet.symmetry.bandreps.smith import SmithForm, smith_normal_form
from topovet.symmetry.bandreps.strata import Stratum, Torus, cell_torus, find_strata, zone_torus


@dataclass(frozen=True, slots=True, eq=False)
class BandRepresentation:
    """One band representation, induced from a maximal Wyckoff position.

    Attributes
    ----------
    orbit
        Position of its Wyckoff position in `BandRepresentations.orbits`.
    corep
        Position of its corepresentation in that orbit's table.
    multiplicities
        (n_column,) its row of E.
    n_bands
        Number of bands.
    """

    orbit: int
    corep: int
    multiplicities: IntArray
    n_bands: int


@dataclass(frozen=True, slots=True, eq=False)
class BandRepresentations:
    """All band representations of one group in one cell.

    Attributes
    ----------
    group
        Its table.
    strata, tables
        The maximal k strata, one of each star, and the corepresentations there.
    orbits
        The maximal Wyckoff positions.
    rows
        The band representations.
    starts
        (n_strata + 1,) first column of each stratum.
    smith
        Of the matrix E.
    relations
        Compatibility relations, found without E.
    zone, cell
        What the group does to k and to places in the cell.
    cell_strata
        All strata of the cell, maximal or not.
    layer
        Where the layer lies; None for a crystal.
    """

    group: DoubleGroup
    strata: tuple[Stratum, ...]
    tables: tuple[CorepTable, ...]
    orbits: tuple[SiteOrbit, ...]
    rows: tuple[BandRepresentation, ...]
    starts: IntArray
    smith: SmithForm
    relations: tuple[Relation, ...]
    zone: Torus
    cell: Torus
    cell_strata: tuple[Stratum, ...]
    layer: Layer | None = None

    @property
    def matrix(self) -> IntArray:
        """(n_row, n_column) E."""
        return np.array([row.multiplicities for row in self.rows])

    @property
    def indicator_group(self) -> tuple[int, ...]:
        """Orders of the cyclic factors, each a divisor of the next; () for the trivial group."""
        return tuple(d for d in self.smith.divisors if d > 1)

    @property
    def column_dimensions(self) -> IntArray:
        """(n_column,) bands in one level of each corepresentation."""
        return np.array([c.dimension for t in self.tables for c in t.coreps])

    @property
    def generators(self) -> IntArray:
        """(n_factor, n_column) multiplicities, negative ones too, that generate the classes.

        Row j of V^-1 is row j of U E divided by d_j.
        """
        distinct = _distinct([row.multiplicities for row in self.rows]).astype(object)
        rows = self.smith.left @ distinct
        divisors = self.smith.divisors
        columns = distinct.shape[1]
        found = [rows[j] // d for j, d in enumerate(divisors) if d > 1]
        return np.array(found, dtype=object).reshape(-1, columns)

    def indicator(self, multiplicities: IntArray) -> tuple[int, ...] | None:
        """Class in the indicator group; None for bands that cannot be gapped everywhere.

        Parameters
        ----------
        multiplicities
            (n_column,) of a set of bands.
        """
        # python integers: the transformation may hold large ones
        y = np.array(multiplicities.tolist(), dtype=object) @ self.smith.right
        if any(y[self.smith.rank :]):
            return None
        return tuple(
            int(value) % d for value, d in zip(y, self.smith.divisors, strict=False) if d > 1
        )

    def violated(self, multiplicities: IntArray) -> tuple[Relation, ...]:
        """Compatibility relations that a set of bands breaks."""
        return tuple(r for r in self.relations if r.violation(multiplicities) > 1e-3)


def compute_band_representations(
    cell: FloatArray,
    rotations: IntArray,
    translations: FloatArray,
    *,
    spinful: bool,
    time_reversal: bool = True,
    layer: Layer | None = None,
) -> BandRepresentations:
    """Band representations of a space or layer group with time reversal, for the cell as it is.

    Results are remembered within a process.

    Parameters
    ----------
    cell
        (3, 3) angstrom, lattice vectors as rows; primitive, conventional or skewed.
    rotations, translations
        (n, 3, 3) integer and (n, 3) fractional: a group modulo the translations of this cell.
    spinful
        Electrons with spin-orbit coupling.
    time_reversal
        Whether it holds.
    layer
        Where the layer lies whose operations these are; None for a crystal.

    Raises
    ------
    NotAGroupError
        The operations are no group.
    """
    return _computed(
        np.asarray(cell, dtype=float).tobytes(),
        np.asarray(rotations, dtype=np.int64).tobytes(),
        np.asarray(translations, dtype=float).tobytes(),
        spinful,
        time_reversal,
        layer,
    )


@functools.lru_cache(maxsize=16)
def _computed(
    lattice: bytes,
    rotations: bytes,
    translations: bytes,
    spinful: bool,
    time_reversal: bool,
    layer: Layer | None,
) -> BandRepresentations:
    group = _table(
        np.frombuffer(lattice).reshape(3, 3),
        np.frombuffer(rotations, dtype=np.int64).reshape(-1, 3, 3),
        np.frombuffer(translations).reshape(-1, 3),
        (spinful, time_reversal),
        layer,
    )
    zone = zone_torus(group.k_actions)
    strata = find_strata(zone, None if layer is None else layer.in_plane)
    maximal = tuple(s for s in strata if s.maximal)
    tables = tuple(find_coreps(little_group_at(group, s.point_frac, s.stabiliser)) for s in maximal)
    cell = cell_torus(group.rotations, group.numerators)
    cell_strata = find_strata(cell)
    if layer is not None:
        cell_strata = strata_of_layer(cell_strata, layer)
    orbits = [place_on_orbit(group, cell, s) for s in cell_strata if s.maximal]
    orbits.sort(key=lambda orbit: orbit.multiplicity)
    rows = tuple(row for i, orbit in enumerate(orbits) for row in induce(i, orbit, tables))
    return BandRepresentations(
        group=group,
        strata=maximal,
        tables=tables,
        orbits=tuple(orbits),
        rows=rows,
        starts=frozen(np.cumsum([0, *(len(t.coreps) for t in tables)])),
        smith=smith_normal_form(_distinct([row.multiplicities for row in rows])),
        relations=find_relations(group, zone, strata, tables),
        zone=zone,
        cell=cell,
        cell_strata=cell_strata,
        layer=layer,
    )


def _table(
    cell: FloatArray,
    rotations: IntArray,
    translations: FloatArray,
    kind: tuple[bool, bool],
    layer: Layer | None,
) -> DoubleGroup:
    """Table of the group; that of a layer is about its middle also where nothing fixes it."""
    spinful, time_reversal = kind
    if layer is not None:
        translations = exact_translations(layer, rotations, translations)
    group = build_double_group(
        cell, rotations, translations, spinful=spinful, time_reversal=time_reversal
    )
    if layer is None:
        return group
    origin = np.array(group.origin)
    origin[layer.axis] = layer.middle
    return replace(group, origin=frozen(origin))


def induce(
    position: int, orbit: SiteOrbit, tables: Sequence[CorepTable]
) -> tuple[BandRepresentation, ...]:
    """Band representations of all corepresentations on one Wyckoff position.

    Parameters
    ----------
    position
        What `BandRepresentation.orbit` is to say.
    orbit
        The Wyckoff position.
    tables
        Corepresentations at the k strata.
    """
    counts = [
        table.count(orbit.characters(table.group.members, table.group.k_frac)) for table in tables
    ]
    return tuple(
        BandRepresentation(
            orbit=position,
            corep=i,
            multiplicities=frozen(row),
            n_bands=orbit.multiplicity * corep.dimension,
        )
        for i, (corep, row) in enumerate(
            zip(orbit.table.coreps, np.concatenate(counts, axis=1), strict=True)
        )
    )


def _distinct(rows: Sequence[IntArray]) -> IntArray:
    return np.unique(np.array(rows), axis=0)
