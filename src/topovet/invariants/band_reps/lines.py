"""How the levels of the occupied bands run on from one special k to the next."""

from __future__ import annotations

import functools
from collections.abc import Sequence

import numpy as np

from topovet.arrays import IntArray
from topovet.invariants.band_reps.levels import corep_labels, names_at
from topovet.invariants.band_reps.results import LineLevels, PointColumns
from topovet.symmetry.bandreps.compatibility import Relation
from topovet.symmetry.bandreps.corepresentations import CorepTable, find_coreps
from topovet.symmetry.bandreps.double_group import little_group_at
from topovet.symmetry.bandreps.indicator_group import BandRepresentations
from topovet.symmetry.spacegroup import name_point_group


def connect_levels(
    found: BandRepresentations, points: Sequence[PointColumns], multiplicities: IntArray
) -> tuple[LineLevels, ...]:
    """Levels on every line of symmetry between two different maximal strata.

    Parameters
    ----------
    found
        Band representations of the group.
    points
        Names of its maximal strata.
    multiplicities
        (n_column,) of bands that obey the compatibility relations.
    """
    lines = [
        r
        for r in found.relations
        if r.dimension == 1 and r.start != r.end and len(r.operations) > 1
    ]
    connected = [_levels_on(found, points, relation, multiplicities) for relation in lines]
    kinds = {(c.start, c.end, c.symmetry, c.levels, c.counts): c for c in reversed(connected)}
    return tuple(sorted(kinds.values(), key=lambda c: (c.start != "Γ", c.start, c.end)))


@functools.lru_cache(maxsize=64)
def _table_on(found: BandRepresentations, relation: Relation) -> CorepTable:
    """Corepresentations in the middle of a line."""
    k = (relation.k_start + relation.k_end) / 2
    return find_coreps(little_group_at(found.group, k, relation.fixing))


def _levels_on(
    found: BandRepresentations,
    points: Sequence[PointColumns],
    relation: Relation,
    multiplicities: IntArray,
) -> LineLevels:
    """The traces at the start, moved to the middle of the line, say what runs along it."""
    table = _table_on(found, relation)
    group = table.group
    columns = slice(found.starts[relation.start], found.starts[relation.start + 1])
    at_start = -relation.coefficients[:, columns] @ multiplicities[columns]
    phases = np.exp(-2j * np.pi * (found.group.translations[group.members] @ group.k_frac))
    counts = table.count(at_start * phases)
    labels = corep_labels(table, names_at(table, ""))
    occurring = np.flatnonzero(counts)
    (x, y, z), (u, v, w) = relation.k_start.tolist(), relation.k_end.tolist()
    return LineLevels(
        start=points[relation.start].name,
        end=points[relation.end].name,
        k_start=(x, y, z),
        k_end=(u, v, w),
        symmetry=name_point_group(group.rotations),
        levels=tuple(labels[i] for i in occurring),
        counts=tuple(int(counts[i]) for i in occurring),
    )
