"""Planes of the Brillouin zone, and the Fourier sum of what is left on them."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.model.fourier import BlochSum

Cell = tuple[int, int, int]


@dataclass(frozen=True, slots=True)
class KPlane:
    """The plane k = origin + x across + y along, closed in x and in y.

    Attributes
    ----------
    name
        For people and as a key, "k1=0" or "k3=1/2".
    origin
        Fractional.
    across, along
        Two reciprocal lattice vectors, integers, that span the plane's own reciprocal lattice: x
        and y are each periodic with period 1. Loops close along y and are swept across x.
    """

    name: str
    origin: tuple[float, float, float]
    across: Cell
    along: Cell

    def k_at(self, xy: FloatArray) -> FloatArray:
        """(n, 3) fractional k of plane coordinates xy (n, 2)."""
        return np.asarray(np.array(self.origin) + xy @ np.array([self.across, self.along]))

    def turned(self) -> KPlane:
        """The same plane with the loops along the other direction; its orientation is reversed."""
        return replace(self, across=self.along, along=self.across)


def coordinate_plane(axis: int, offset: float) -> KPlane:
    """k_axis = offset, axis counted from 0, with (axis, across, along) in cyclic order."""
    unit = np.eye(3, dtype=int)
    origin = [0.0, 0.0, 0.0]
    origin[axis] = offset
    shown = {0.0: "0", 0.5: "1/2"}.get(offset, f"{offset:g}")
    across, along = unit[(axis + 1) % 3].tolist(), unit[(axis + 2) % 3].tolist()
    return KPlane(
        f"k{axis + 1}={shown}",
        (origin[0], origin[1], origin[2]),
        (across[0], across[1], across[2]),
        (along[0], along[1], along[2]),
    )


def invariant_planes(periodic: tuple[bool, bool, bool]) -> tuple[KPlane, ...]:
    """The planes that time reversal maps to themselves: k_i = 0 and 1/2 in 3D, one plane in 2D.

    Raises
    ------
    ValueError
        Fewer than two directions are periodic.
    """
    if all(periodic):
        return tuple(coordinate_plane(axis, offset) for axis in range(3) for offset in (0.0, 0.5))
    if sum(periodic) != 2:
        raise ValueError("planes of k need at least two periodic directions")
    return (coordinate_plane(periodic.index(False), 0.0),)


def bloch_on_plane(bloch: BlochSum, plane: KPlane) -> BlochSum:
    """H as a sum over (x, y): k.R = origin.R + x across.R + y along.R, the first part done once."""
    projected = bloch.r_half @ np.array([plane.across, plane.along, plane.origin], dtype=float).T
    # the third component is the fixed part of the phase over 2 pi, taken once
    return BlochSum(projected, bloch.table, bloch.n_orb).partial((2,), np.ones(1))
