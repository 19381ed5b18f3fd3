"""Where operations leave points alone: strata of the unit cell and of the Brillouin zone.

An operation x' = W x + w on the torus R^3/Z^3 fixes points, closed lines, closed planes or nothing.
Intersections of such sets are strata: all points of one share their stabiliser, but for more
special points inside. Those with no more special point inside are the special positions of the
least freedom: the maximal Wyckoff positions of the cell, and the maximal strata of k-space. Most
are points; some are lines (K-H of P-3) or have all the room there is (P1).

Coordinates are integers over a common denominator, so that nothing is compared within a tolerance.
A fixed set A z + b in Z^3 is solved by the Smith normal form U A V = D, z = V (m - U b)/D.
"""

from __future__ import annotations

import functools
import itertools
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray, IntArray, frozen
from topovet.errors import TopovetError
from topovet.symmetry.bandreps.smith import small_smith

SPLITS = 12**3
"""A stratum is cut at most three times, each time into parts by a divisor of 12, as the
elementary divisors of W - 1 are for crystallographic rotations."""


REFINEMENT = 10**9 + 7
GENERIC_STEPS = np.array([1, 10007, 100140049])
"""A point off all special points of a stratum lies so many of these finer steps along it: their
integer combinations with coefficients as small as those of W - 1 do not vanish."""


class StrataError(TopovetError):
    """Special positions that do not fit the common denominator: no crystallographic group."""


@dataclass(frozen=True, slots=True, eq=False)
class Torus:
    """A group acting on R^3/Z^3: x' = W x + w.

    Attributes
    ----------
    actions
        (n, 3, 3) integer W on columns.
    shifts
        (n, 3) integers, `denominator` times w.
    denominator
        That of all coordinates.
    """

    actions: IntArray
    shifts: IntArray
    denominator: int

    def images(self, points: IntArray) -> IntArray:
        """(n, ..., 3) images, not reduced, of points (..., 3)."""
        moved = np.einsum("nij,...j->n...i", self.actions, points)
        shifts = self.shifts.reshape(-1, *(1,) * (points.ndim - 1), 3)
        return np.asarray(moved + shifts)


@dataclass(frozen=True, slots=True, eq=False)
class Stratum:
    """One set of points with one stabiliser, standing for its images under the group.

    Attributes
    ----------
    point
        (3,) integers over `denominator`: one of its points.
    directions
        (3, m) integers, a basis of its lattice of directions, m its dimension.
    frame
        (3, 3) unimodular; rows from m on vanish on the directions: the coordinates across it.
    denominator
        That of all coordinates.
    stabiliser
        Operations that fix all of it.
    maximal
        Whether no point inside is fixed by more.
    """

    point: IntArray
    directions: IntArray
    frame: IntArray
    denominator: int
    stabiliser: IntArray
    maximal: bool

    @property
    def dimension(self) -> int:
        return int(self.directions.shape[1])

    @property
    def point_frac(self) -> FloatArray:
        """(3,) fractional."""
        return np.asarray(self.point / self.denominator)

    def lift(self, point: IntArray) -> IntArray | None:
        """The lattice vector to add to a point (integers) so that it lies in the flat through
        `point`; None where no image of the point modulo lattice does."""
        m, q = self.dimension, self.denominator
        across = self.frame[m:] @ (self.point - point)
        if (across % q).any():
            return None
        steps = np.concatenate([np.zeros(m, dtype=np.int64), across // q])
        return np.asarray(np.round(np.linalg.inv(self.frame) @ steps), dtype=np.int64)


@dataclass(frozen=True, slots=True, eq=False)
class _Flat:
    """point + directions y, as in `Stratum`."""

    point: IntArray
    directions: IntArray


def generic_point(torus: Torus, stratum: Stratum) -> tuple[Torus, IntArray]:
    """A point of a stratum that no more than its stabiliser fixes, on a finer denominator."""
    if stratum.maximal:
        return torus, stratum.point
    finer = Torus(torus.actions, torus.shifts * REFINEMENT, torus.denominator * REFINEMENT)
    steps = GENERIC_STEPS[: stratum.dimension]
    return finer, stratum.point * REFINEMENT + stratum.directions @ steps


def cell_torus(rotations: IntArray, numerators: IntArray) -> Torus:
    """The unit cell under space-group operations whose translations are numerators over n."""
    return Torus(
        actions=np.asarray(rotations, dtype=np.int64),
        shifts=np.asarray(numerators, dtype=np.int64) * SPLITS,
        denominator=len(rotations) * SPLITS,
    )


def zone_torus(k_actions: IntArray) -> Torus:
    """The Brillouin zone."""
    return Torus(k_actions, np.zeros((len(k_actions), 3), dtype=np.int64), SPLITS)


def find_strata(torus: Torus, within: IntArray | None = None) -> tuple[Stratum, ...]:
    """All strata, one of each orbit, those of the largest dimension first.

    Remembered within a process: they do not depend on lengths and angles of the cell.

    Parameters
    ----------
    torus
        The cell or the zone under the group.
    within
        (3, m) integer directions through the origin of a part that the group keeps, to which the
        search is restricted; all of the torus if None.
    """
    whole = np.eye(3, dtype=np.int64) if within is None else within
    actions, shifts, whole = (
        np.ascontiguousarray(a, dtype=np.int64) for a in (torus.actions, torus.shifts, whole)
    )
    return _found_strata(actions.tobytes(), shifts.tobytes(), torus.denominator, whole.tobytes())


@functools.lru_cache(maxsize=64)
def _found_strata(
    actions: bytes, shifts: bytes, denominator: int, within: bytes
) -> tuple[Stratum, ...]:
    torus = Torus(
        np.frombuffer(actions, dtype=np.int64).reshape(-1, 3, 3),
        np.frombuffer(shifts, dtype=np.int64).reshape(-1, 3),
        denominator,
    )
    directions = np.frombuffer(within, dtype=np.int64).reshape(3, -1)
    whole = _Flat(np.zeros(3, dtype=np.int64), directions)
    waiting, seen, found = [whole], {_key(whole, torus.denominator)}, []
    while waiting:
        flat = waiting.pop(0)
        fixed, cuts = _cut_by_all(torus, flat)
        found.append(_as_stratum(flat, torus, fixed, maximal=not cuts))
        for cut in cuts:
            if _key(cut, torus.denominator) not in seen:
                seen |= _orbit_keys(torus, cut)
                waiting.append(cut)
    return tuple(sorted(found, key=lambda s: -s.dimension))


def _as_stratum(flat: _Flat, torus: Torus, fixed: list[int], *, maximal: bool) -> Stratum:
    flat = _canonical(flat, torus.denominator)
    return Stratum(
        point=frozen(flat.point),
        directions=frozen(flat.directions),
        frame=frozen(_frame(flat.directions)),
        denominator=torus.denominator,
        stabiliser=np.array(fixed, dtype=np.int64),
        maximal=maximal,
    )


def _cut_by_all(torus: Torus, flat: _Flat) -> tuple[list[int], list[_Flat]]:
    """Operations that fix all of a flat, and the parts of it that others fix."""
    eye, q = np.eye(3, dtype=np.int64), torus.denominator
    slopes = (torus.actions - eye) @ flat.directions
    offsets = torus.images(flat.point) - flat.point
    fixed: list[int] = []
    cuts: dict[tuple[int, ...], _Flat] = {}
    for g, (slope, offset) in enumerate(zip(slopes, offsets, strict=True)):
        if slope.any():
            for cut in _solutions(flat, slope, offset, q):
                cuts.setdefault(_key(cut, q), cut)
        elif not (offset % q).any():
            fixed.append(g)
    return fixed, list(cuts.values())


def _solutions(flat: _Flat, slope: IntArray, offset: IntArray, q: int) -> Iterator[_Flat]:
    """Parts of a flat where slope y + offset/q is a lattice vector."""
    form = small_smith(tuple(map(tuple, slope.tolist())))
    right = form.right.astype(np.int64)
    rest = form.left.astype(np.int64) @ offset
    if (rest[form.rank :] % q).any():
        return
    free = flat.directions @ right[:, form.rank :]
    for steps in itertools.product(*(range(d) for d in form.divisors)):
        y = np.zeros(slope.shape[1], dtype=np.int64)
        for i, (d, step) in enumerate(zip(form.divisors, steps, strict=True)):
            value = q * step - int(rest[i])
            if value % d:
                raise StrataError("the group has special positions with uncommon denominators")
            y[i] = value // d
        yield _Flat((flat.point + flat.directions @ (right @ y)) % q, free)


def _frame(directions: IntArray) -> IntArray:
    """(3, 3) unimodular whose rows from m on vanish on the directions."""
    if not directions.shape[1]:
        return np.eye(3, dtype=np.int64)
    return small_smith(tuple(map(tuple, directions.tolist()))).left.astype(np.int64)


def _canonical(flat: _Flat, q: int) -> _Flat:
    """The same flat with directions that depend on their span alone, and a fixed point on it."""
    m = flat.directions.shape[1]
    if m in (0, 3):
        point = flat.point % q if m == 0 else np.zeros(3, dtype=np.int64)
        return _Flat(point, np.eye(3, dtype=np.int64)[:, :m])
    if m == 1:
        directions = _leading_positive(flat.directions[:, 0])[:, None]
    else:
        normal = _leading_positive(_frame(flat.directions)[2])
        directions = _frame(normal[:, None])[1:].T  # rows that vanish on the normal: in the plane
    frame = _frame(directions)
    across = (frame @ flat.point) % q
    across[:m] = 0
    back = np.round(np.linalg.inv(frame)).astype(np.int64)
    return _Flat((back @ across) % q, directions)


def _leading_positive(vector: IntArray) -> IntArray:
    return np.asarray(vector * np.sign(vector[np.flatnonzero(vector)[0]]))


def _key(flat: _Flat, q: int) -> tuple[int, ...]:
    """What identifies a flat on the torus."""
    flat = _canonical(flat, q)
    m = flat.directions.shape[1]
    across = (_frame(flat.directions)[m:] @ flat.point) % q
    return (m, *flat.directions.reshape(-1).tolist(), *across.tolist())


def _orbit_keys(torus: Torus, flat: _Flat) -> set[tuple[int, ...]]:
    points, directions = torus.images(flat.point), torus.actions @ flat.directions
    distinct = {
        (tuple((p % torus.denominator).tolist()), tuple(map(tuple, d.tolist())))
        for p, d in zip(points, directions, strict=True)
    }
    return {
        _key(_Flat(np.array(p), np.array(d, dtype=np.int64).reshape(3, -1)), torus.denominator)
        for p, d in distinct
    }
