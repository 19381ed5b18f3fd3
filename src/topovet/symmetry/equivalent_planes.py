"""Planes of k that operations of the Hamiltonian map to each other.

A plane spanned by reciprocal lattice vectors is where k.n = c modulo 1, with n a primitive lattice
vector (integers) and c its offset. An operation that takes rows k to k V takes it to the plane
(V^-1 n, c). What is counted on the occupied states of one is then known of the other.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from topovet.arrays import IntArray
from topovet.model.plane import Cell, KPlane
from topovet.symmetry.group_results import GroupTest
from topovet.units import MEV_PER_EV

PLANES_SHARE = 0.05
"""Operations that hold to within this share of the smallest direct gap met make planes equivalent:
what is counted on one of them is then taken over to the others."""

OFFSET_DECIMALS = 9
"""Offsets are 0 or 1/2 up to rounding."""

PlaneKey = tuple[Cell, float]
"""The normal n, its last non-zero entry positive, and the offset c in [0, 1)."""


def plane_key(plane: KPlane) -> PlaneKey:
    """The plane as a set of k, whatever spans it."""
    normal = np.cross(np.array(plane.across), np.array(plane.along))
    return _key(normal, float(np.array(plane.origin) @ normal))


def held_within(group: GroupTest, limit_mev: float) -> list[int]:
    """Positions, among the structure's operations, of those that H has to within a limit."""
    return [
        i
        for i, test in enumerate(group.operations)
        if test.judged_mev is not None and test.judged_mev <= limit_mev
    ]


def equivalent_planes(
    planes: Sequence[KPlane], group: GroupTest | None, direct_gap_ev: float
) -> tuple[tuple[str, ...], ...]:
    """Names of planes that operations of H make of each other, see `group_planes`.

    Parameters
    ----------
    planes
        Planes spanned by reciprocal lattice vectors.
    group
        The structure's operations as tested on H; None where they were not.
    direct_gap_ev
        Smallest direct gap met.
    """
    if group is None:
        return ()
    held = held_within(group, PLANES_SHARE * MEV_PER_EV * direct_gap_ev)
    # an operation holds as well as its inverse, so that W serves for k' = k W^-1
    return group_planes(planes, [group.operations[i].rotation for i in held])


def group_planes(
    planes: Sequence[KPlane], k_rotations: Sequence[IntArray]
) -> tuple[tuple[str, ...], ...]:
    """Names of planes that are mapped to each other, in the order given; lone planes are left out.

    Parameters
    ----------
    planes
        Planes spanned by reciprocal lattice vectors.
    k_rotations
        (3, 3) integers V of the operations, k' = k V.
    """
    keys = [plane_key(plane) for plane in planes]
    group_of = list(range(len(planes)))
    images = [np.round(np.linalg.inv(np.asarray(v))).astype(np.int64) for v in k_rotations]
    for i, (normal, offset) in enumerate(keys):
        for image in images:
            key = _key(image @ np.array(normal), offset)
            for j in (j for j, other in enumerate(keys) if other == key):
                first, second = sorted((group_of[i], group_of[j]))
                group_of = [first if g == second else g for g in group_of]
    groups = [
        tuple(plane.name for plane, g in zip(planes, group_of, strict=True) if g == found)
        for found in sorted(set(group_of))
    ]
    return tuple(group for group in groups if len(group) > 1)


def _key(normal: IntArray, offset: float) -> PlaneKey:
    sign = int(np.sign(normal[np.flatnonzero(normal)[-1]]))
    x, y, z = (sign * int(c) for c in normal)
    return (x, y, z), round(sign * offset, OFFSET_DECIMALS) % 1.0
