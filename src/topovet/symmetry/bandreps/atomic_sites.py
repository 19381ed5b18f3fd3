"""Band representations of orbitals on the atoms of a crystal, wherever the atoms sit.

An atom on a position with free coordinates can be moved along it without a change of its site
symmetry, so that its band representations are those of the stratum it lies on.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.symmetry.bandreps.indicator_group import (
    BandRepresentation,
    BandRepresentations,
    induce,
)
from topovet.symmetry.bandreps.induction import SiteOrbit, place_on_orbit
from topovet.symmetry.bandreps.strata import Stratum


@dataclass(frozen=True, slots=True, eq=False)
class AtomicOrbit:
    """A Wyckoff position with atoms, and where the first of them is, (3,) fractional."""

    orbit: SiteOrbit
    position_frac: FloatArray


def orbits_of_atoms(
    found: BandRepresentations, positions_frac: FloatArray, tolerance_ang: float
) -> tuple[AtomicOrbit, ...]:
    """The kinds of Wyckoff positions on which atoms sit, each once.

    Parameters
    ----------
    positions_frac
        (n_atoms, 3) fractional, in the input cell.
    tolerance_ang
        How far an atom may be from the position it is counted to.
    """
    by_freedom = sorted(found.cell_strata, key=lambda s: s.dimension)
    taken: dict[int, FloatArray] = {}
    for x in np.asarray(positions_frac, dtype=float).reshape(-1, 3):
        place = next(i for i, s in enumerate(by_freedom) if _lies_on(found, s, x, tolerance_ang))
        taken.setdefault(place, x)
    return tuple(
        AtomicOrbit(place_on_orbit(found.group, found.cell, by_freedom[i]), x)
        for i, x in taken.items()
    )


def _lies_on(
    found: BandRepresentations, stratum: Stratum, position: FloatArray, tolerance_ang: float
) -> bool:
    """Whether an image of a place is within a distance of a stratum. All places are on P1's."""
    group, m = found.group, stratum.dimension
    images = group.rotations @ (position - group.origin) + group.translations
    across = (images - stratum.point_frac) @ stratum.frame[m:].T
    residue = across - np.round(across)
    back = np.linalg.inv(stratum.frame)
    cell = group.operations.cell
    apart = residue @ back[:, m:].T @ cell
    if m:  # what lies along the stratum is no distance
        along, _ = np.linalg.qr((stratum.directions.T @ cell).T)
        apart = apart - apart @ along @ along.T
    return bool(np.linalg.norm(apart, axis=1).min() < tolerance_ang)


def rows_on_atoms(
    found: BandRepresentations, atoms: tuple[AtomicOrbit, ...]
) -> tuple[BandRepresentation, ...]:
    """Band representations of all corepresentations on positions with atoms."""
    return tuple(row for i, a in enumerate(atoms) for row in induce(i, a.orbit, found.tables))
