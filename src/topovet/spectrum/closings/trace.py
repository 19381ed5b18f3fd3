"""Nodal lines, followed step by step: a step along the tangent, then back onto the line.

A closing lies on a line if the gap stays closed at a step away from it, and half-way there, in the
direction in which the bands part most slowly. A node whose bands part with the square of the
distance in that direction has an open gap there.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.model.fourier import BlochSum
from topovet.spectrum.closings.local import Touching, step_onto
from topovet.spectrum.eigen import eigenvalues
from topovet.spectrum.gap import GAPLESS_EV

STEP = 0.01
"""Length of a step, as a part of the shortest reciprocal vector."""

ON_LINE_EV = 1e-5
"""Gap that may be left after a step onto the line, beside what the closing itself has: symmetry to
six decimals of a file leaves less."""

MOST_STEPS = 1000

SHORTENINGS = 4
"""Times that a step is halved where the line turns too quickly for it."""

SHARPEST = 0.7
"""Least cosine of the angle between a step and the one before."""


@dataclass(frozen=True, slots=True, eq=False)
class TracedLine:
    """A line of closings.

    Attributes
    ----------
    k_frac
        (n, 3) points in order, not folded back into one zone.
    energies_ev
        (n,) mean energy of the bands that touch.
    gaps_ev
        (n,) what is left of the gap.
    closed
        Whether it comes back to where it began, modulo a reciprocal vector.
    winding
        (3,) that reciprocal vector; not zero for a line that crosses the zone.
    """

    k_frac: FloatArray
    energies_ev: FloatArray
    gaps_ev: FloatArray
    closed: bool
    winding: IntArray

    def length(self, reciprocal: FloatArray) -> float:
        """1/angstrom, the way back to the beginning included where it is closed."""
        ends = [self.k_frac[:1] + self.winding] if self.closed else []
        points = np.concatenate([self.k_frac, *ends]) @ reciprocal
        return float(np.linalg.norm(np.diff(points, axis=0), axis=1).sum())

    def tangent(self, i: int, reciprocal: FloatArray) -> FloatArray:
        """(3,) unit vector along the line at a point, Cartesian."""
        before, after = max(i - 1, 0), min(i + 1, len(self.k_frac) - 1)
        along = (self.k_frac[after] - self.k_frac[before]) @ reciprocal
        return np.asarray(along / np.linalg.norm(along))


def step_length(reciprocal: FloatArray) -> float:
    """1/angstrom."""
    return STEP * float(np.linalg.norm(reciprocal, axis=1).min())


def is_on_line(bloch: BlochSum, touching: Touching, filling: int, reciprocal: FloatArray) -> bool:
    """Whether the gap stays closed along the direction in which the bands part most slowly."""
    return _closed_along(bloch, touching, filling, reciprocal, touching.tangent)


def is_on_surface(
    bloch: BlochSum, touching: Touching, filling: int, reciprocal: FloatArray
) -> bool:
    """Whether it stays closed along the two slowest directions and between them.

    Where lines cross it does so along the lines only.
    """
    _, axes = np.linalg.eigh(touching.metric)
    first, second = axes[:, 0], axes[:, 1]
    ways = (first, second, (first + second) / np.sqrt(2), (first - second) / np.sqrt(2))
    return all(_closed_along(bloch, touching, filling, reciprocal, way) for way in ways)


def _closed_along(
    bloch: BlochSum,
    touching: Touching,
    filling: int,
    reciprocal: FloatArray,
    tangent: FloatArray,
) -> bool:
    for part in (0.5, -0.5, 1.0, -1.0):
        away = part * step_length(reciprocal) * tangent
        start = touching.k_frac + away @ np.linalg.inv(reciprocal)
        _, gap = step_onto(bloch, start, filling, touching, tangent, reciprocal)
        if gap > _allowed(touching):
            return False
    return True


def trace_line(
    bloch: BlochSum,
    touching: Touching,
    filling: int,
    reciprocal: FloatArray,
    *,
    most_steps: int = MOST_STEPS,
) -> TracedLine:
    """The line through a closing, followed until it closes or breaks off at both ends.

    Parameters
    ----------
    bloch, filling
        The Hamiltonian, and the number of bands below the line.
    touching
        A closing for which `is_on_line` holds.
    reciprocal
        (3, 3) reciprocal vectors as rows, 1/angstrom.
    most_steps
        A longer line is cut off, and not closed.
    """
    follow = _Follower(bloch, touching, filling, reciprocal, most_steps)
    forth, closed = follow.run(touching.tangent)
    if closed:
        points = forth[:-1]
        winding = np.round(forth[-1] - forth[0]).astype(np.int64)
    else:
        back, _ = follow.run(-touching.tangent)
        points, winding = [*back[:0:-1], *forth], np.zeros(3, dtype=np.int64)
    k_frac = np.array(points)
    energies = eigenvalues(bloch, k_frac)
    bands = slice(filling - touching.n_below, filling + touching.n_above)
    return TracedLine(
        k_frac=k_frac,
        energies_ev=energies[:, bands].mean(axis=1),
        gaps_ev=energies[:, filling] - energies[:, filling - 1],
        closed=closed,
        winding=winding,
    )


def _allowed(touching: Touching) -> float:
    return min(ON_LINE_EV + 3 * touching.gap_ev, GAPLESS_EV)


@dataclass(frozen=True, slots=True, eq=False)
class _Follower:
    bloch: BlochSum
    start: Touching
    filling: int
    reciprocal: FloatArray
    most_steps: int

    def run(self, tangent: FloatArray) -> tuple[list[FloatArray], bool]:
        """Points from the start on, and whether the last one is the first again."""
        points, step = [self.start.k_frac], step_length(self.reciprocal)
        while len(points) < self.most_steps:
            found = self._next(points[-1], tangent, step)
            if found is None:
                return points, False
            point, tangent = found
            points.append(point)
            away = point - self.start.k_frac
            home = float(np.linalg.norm((away - np.round(away)) @ self.reciprocal))
            if len(points) > 3 and home < 0.75 * step and self._is_home(points):
                return points, True
        return points, False

    def _next(
        self, k_frac: FloatArray, tangent: FloatArray, step: float
    ) -> tuple[FloatArray, FloatArray] | None:
        for _ in range(SHORTENINGS):
            start = k_frac + step * tangent @ np.linalg.inv(self.reciprocal)
            point, gap = step_onto(
                self.bloch, start, self.filling, self.start, tangent, self.reciprocal
            )
            moved = (point - k_frac) @ self.reciprocal
            length = np.linalg.norm(moved)
            if gap < _allowed(self.start) and length > 0 and moved @ tangent > SHARPEST * length:
                return point, np.asarray(moved / length)
            step /= 2
        return None

    def _is_home(self, points: list[FloatArray]) -> bool:
        """Whether the start lies ahead or was just passed, and not on another branch."""
        last = (points[-1] - points[-2]) @ self.reciprocal
        first = (points[1] - points[0]) @ self.reciprocal
        return abs(float(last @ first)) > 0.5 * float(np.linalg.norm(last) * np.linalg.norm(first))
