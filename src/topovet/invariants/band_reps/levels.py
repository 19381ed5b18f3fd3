"""Multiplicities of a Hamiltonian's bands at the maximal k strata of its group."""

from __future__ import annotations

import functools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import IntArray
from topovet.invariants.band_irreps import MIN_PURITY, measure_content
from topovet.invariants.band_reps.results import PointColumns
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.notation import k_text, mev
from topovet.symmetry.bandreps.corepresentations import CorepresentationError, CorepTable
from topovet.symmetry.bandreps.indicator_group import BandRepresentations
from topovet.symmetry.irrep_names import IrrepName, name_irreps
from topovet.symmetry.irreps import isotypic_projectors
from topovet.symmetry.little_group import same_point
from topovet.symmetry.operators import WannierOperator, operator_at
from topovet.symmetry.special_points import SpecialPoint, find_special_points
from topovet.units import MEV_PER_EV

MIN_GAP_EV = 1e-3
"""Least gap at a k with which a set of bands is well defined there."""


@dataclass(frozen=True, slots=True)
class Reading:
    """Multiplicities of the lowest bands, or why they cannot be read.

    Attributes
    ----------
    vector
        (n_column,) of the bands 0 … filling - 1; None where not readable.
    reason
        Why not; empty otherwise.
    purity
        Least purity over all points.
    """

    vector: IntArray | None
    reason: str
    purity: float


@dataclass(frozen=True, slots=True, eq=False)
class Levels:
    """Points with the names of what occurs there, and readings by filling."""

    points: tuple[PointColumns, ...]
    readings: dict[int, Reading]


def read_levels(
    found: BandRepresentations,
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    crystal: Crystal,
    fillings: Sequence[int],
) -> Levels:
    """Multiplicities of the lowest bands for several fillings.

    Parameters
    ----------
    found
        Band representations of the group.
    bloch
        The Hamiltonian.
    operators
        The unitary operations of the group on the Wannier functions, in its order.
    crystal
        Gives the names of the points.
    fillings
        Numbers of bands, counted from the lowest, spin counted.
    """
    special = find_special_points(crystal, found.group.operations)
    points, parts = [], []
    for stratum, table in zip(found.strata, found.tables, strict=True):
        k = table.group.k_frac
        name = _name_of(special, k.tolist())
        names = names_at(table, name)
        points.append(_columns(table, names, name, stratum.dimension))
        parts.append(_read_point(table, names, name, bloch, operators, fillings))
    readings = {n: _join([part[n] for part in parts]) for n in fillings}
    return Levels(tuple(points), readings)


def _name_of(special: Sequence[SpecialPoint], k: Sequence[float]) -> str:
    named = (s.name for s in special if any(same_point(np.array(k), arm) for arm in s.star))
    return next(named, k_text(k))


@functools.lru_cache(maxsize=128)
def names_at(table: CorepTable, point: str) -> tuple[IrrepName, ...]:
    """Names of the irreps of a group; remembered, since a group is met again and again."""
    return name_irreps(table.group, table.irreps, point)


def corep_labels(table: CorepTable, names: Sequence[IrrepName]) -> tuple[str, ...]:
    """Labels of the levels that the corepresentations make."""
    return tuple(names[c.irreps[0]].level_label for c in table.coreps)


def _columns(
    table: CorepTable, names: Sequence[IrrepName], name: str, freedom: int
) -> PointColumns:
    x, y, z = (float(c) for c in table.group.k_frac)
    return PointColumns(
        name=name,
        k_frac=(x, y, z),
        freedom=freedom,
        labels=corep_labels(table, names),
        dimensions=tuple(c.dimension for c in table.coreps),
    )


def _read_point(
    table: CorepTable,
    names: Sequence[IrrepName],
    name: str,
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    fillings: Sequence[int],
) -> dict[int, Reading]:
    """Multiplicities at one k, by filling."""
    k = table.group.k_frac[None]
    energies, states = np.linalg.eigh(bloch.at(k)[0])
    matrices = np.array([operator_at(operators[g], k)[0] for g in table.group.members])
    projectors = isotypic_projectors(table.irreps, matrices)
    readings: dict[int, Reading] = {}
    for n in fillings:
        gap = float(energies[n] - energies[n - 1]) if 0 < n < len(energies) else np.inf
        if gap < MIN_GAP_EV:
            why = f"at {name} the gap above band {n} is {mev(MEV_PER_EV * gap)}"
            readings[n] = Reading(None, why, 0.0)
            continue
        content = measure_content(states[:, :n], projectors, names)
        if not content.resolved:
            why = (
                f"at {name} the irreps of the lowest {n} bands have a purity of "
                f"{content.purity:.2f}, at least {MIN_PURITY} needed"
            )
            readings[n] = Reading(None, why, content.purity)
            continue
        try:
            vector = table.from_irreps(np.array(content.counts))
            readings[n] = Reading(vector, "", content.purity)
        except CorepresentationError as error:
            readings[n] = Reading(None, str(error), content.purity)
    return readings


def _join(parts: Sequence[Reading]) -> Reading:
    """All points of one filling."""
    purity = min(part.purity for part in parts)
    if reasons := [part.reason for part in parts if part.reason]:
        return Reading(None, reasons[0], purity)
    vectors = [part.vector for part in parts if part.vector is not None]
    return Reading(np.concatenate(vectors), "", purity)
