"""High-symmetry k of a crystal, in its own cell: special points of the band path, and the TRIM."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from ase.cell import Cell

from topovet.arrays import FloatArray, frozen
from topovet.model.crystal import Crystal
from topovet.notation import k_text
from topovet.symmetry.little_group import OperationList, same_point, star_of
from topovet.symmetry.trim import trim_points


@dataclass(frozen=True, slots=True, eq=False)
class SpecialPoint:
    """One representative of a star of high-symmetry points.

    Attributes
    ----------
    name
        That of the band path ("Γ", "L", …; two names of one star joined, "K/U"), or the coordinates
        of a TRIM that the path does not name.
    k_frac
        (3,) fractional.
    star
        (n_star, 3) all images, itself first.
    is_trim
        2k is a reciprocal lattice vector.
    """

    name: str
    k_frac: FloatArray
    star: FloatArray
    is_trim: bool


def find_special_points(crystal: Crystal, operations: OperationList) -> tuple[SpecialPoint, ...]:
    """Special points of the lattice's path and the TRIM, one for each star.

    The names are ASE's for the lattice (Setyawan and Curtarolo), the stars those of the operations.
    Where the crystal is less symmetric than its lattice, the images of a named point that it does
    not connect appear under their coordinates if they are TRIM, else not at all.

    Parameters
    ----------
    crystal
        Gives the lattice and the periodic directions.
    operations
        The group, time reversal included where it holds.

    References
    ----------
    Setyawan, Curtarolo, Comput. Mater. Sci. 49, 299 (2010), doi:10.1016/j.commatsci.2010.05.010
    """
    named = _path_points(crystal)
    trim = trim_points(crystal.periodic)
    names: list[str] = []
    points: list[FloatArray] = []
    stars: list[FloatArray] = []
    for name, k in [*named, *((k_text(k.tolist()), k) for k in trim)]:
        known = next((i for i, s in enumerate(stars) if any(same_point(k, arm) for arm in s)), None)
        if known is None:
            names.append(name)
            points.append(k)
            stars.append(star_of(operations, k))
        elif name[0] != "(":
            names[known] += f"/{name}"
    order = sorted(range(len(names)), key=lambda i: (names[i] != "Γ", names[i][0] == "("))
    return tuple(
        SpecialPoint(
            name=names[i],
            k_frac=frozen(points[i]),
            star=frozen(stars[i]),
            is_trim=any(same_point(stars[i][0], k) for k in trim),
        )
        for i in order
    )


def _path_points(crystal: Crystal) -> list[tuple[str, FloatArray]]:
    """Names and coordinates of the path's special points, Gamma under its Greek name."""
    path = Cell(np.array(crystal.cell)).bandpath(pbc=crystal.periodic, npoints=0)
    points = sorted(path.special_points.items())
    return [("Γ" if n == "G" else n, np.asarray(k, dtype=float)) for n, k in points]
