"""Closed lines of k with as many points as their states ask for.

Points are put where the occupied space turns: a link between neighbours that loses too much of it,
|1 - M†M| above a bound, gets a point in its middle, again and again, so that a narrow gap on a line
costs a few points instead of a fine mesh. A line is done when leaving out every second of its
points moves its centres by a small fraction of their largest gap only; otherwise the bound is
lowered. States are solved for once at each k.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from topovet.errors import ConvergenceError
from topovet.invariants.flow import closest_steps, largest_gaps
from topovet.invariants.wilson_loop import (
    LinePoints,
    Links,
    hybrid_wannier_centres,
    loop_links,
    renewed_links,
    worst_singular_values,
)

Solve = Callable[[FloatArray], ComplexArray]
"""From plane coordinates (n, 2) to orthonormal states (n, n_orb, n_occ)."""

Reversal = Callable[[FloatArray, ComplexArray], ComplexArray]
"""From x (n,) and states (n, n_orb, n_occ) at (x, y), x being 0 or 1/2, to those at (x, 1 - y)."""

DECIMALS = 12
"""Coordinates are kept to this many decimals, so that y and 1 - y fold onto the same number."""


@dataclass(frozen=True, slots=True)
class LineCriteria:
    """When a line of k has enough points.

    Attributes
    ----------
    points
        Points to begin with, even, so that y = 1/2 is among them.
    loss
        Largest |1 - M†M| of a link to begin with: neighbouring occupied spaces overlap with
        singular values of at least sqrt(1 - loss).
    point_step
        Largest movement of the centres when every second point is left out, as a fraction of
        their largest gap. The error falls with the square of the spacing, so that of the full
        line is about a third of it.
    finest
        Smallest distance of points; states that still turn between them mean a closed gap.
    """

    points: int = 12
    loss: float = 0.35
    point_step: float = 0.15
    finest: float = 2.0**-22

    def __post_init__(self) -> None:
        if self.points < 4 or self.points % 2:
            raise ValueError("a line begins with an even number of points, at least 4")


@dataclass(frozen=True, slots=True, eq=False)
class SolvedLine:
    """A line with centres that no longer depend on its points.

    Attributes
    ----------
    across
        Coordinate of the line.
    hwcc
        (n_occ,) centres in [0, 1), ascending.
    smallest_singular_value
        Of the link that loses most on the line.
    along
        (n_points,) coordinates of its points in [0, 1), ascending.
    states
        (n_points, n_orb, n_occ); None once they are no longer needed.
    link_phases
        (n_points,) arg det of the overlap from each point to the next, for these very states.
    """

    across: float
    hwcc: FloatArray
    smallest_singular_value: float
    along: FloatArray
    states: ComplexArray | None
    link_phases: FloatArray

    @property
    def n_points(self) -> int:
        return len(self.along)


def solve_lines(
    solve: Solve,
    across: FloatArray,
    criteria: LineCriteria,
    *,
    extra: FloatArray | None = None,
    reversal: Reversal | None = None,
    closing: ComplexArray | None = None,
) -> list[SolvedLine]:
    """Centres on the lines at the given coordinates, points added until they stand.

    Parameters
    ----------
    solve
        States on the plane.
    across
        (n_lines,) coordinates of the lines.
    criteria
        When a line is done.
    extra
        (n_lines,) one more coordinate along each line that has to be among its points.
    reversal
        Where given, lines at 0 and 1/2 are solved for y <= 1/2 only, the rest is time-reversed.
    closing
        See `topovet.invariants.wilson_loop.loop_links`.

    Raises
    ------
    ConvergenceError
        States still turn between points at the finest distance, or the budget of `solve` is spent.
    """
    batch = _Batch(solve, across, reversal)
    return _settle(batch, batch.first_points(criteria.points, extra), criteria, closing)


def extend_line(
    solve: Solve,
    line: SolvedLine,
    along: FloatArray,
    criteria: LineCriteria,
    *,
    reversal: Reversal | None = None,
    closing: ComplexArray | None = None,
) -> SolvedLine:
    """The line with more points, or with its states once more.

    Parameters
    ----------
    solve, criteria, reversal, closing
        As they were when the line was solved.
    line
        If its states are gone they are solved for again.
    along
        (n,) coordinates of the new points, where it has none yet.
    """
    batch = _Batch(solve, np.array([line.across]), reversal)
    if line.states is None:
        points = batch.points_at(np.concatenate([line.along, along]))
    else:
        points = LinePoints(np.array([line.n_points]), line.along, line.states)
        if len(along):
            one = np.zeros(1, dtype=np.int64)
            points = batch.with_more(points, one, np.zeros(len(along), dtype=np.int64), along)
    return _settle(batch, points, criteria, closing)[0]


def _settle(
    batch: _Batch, points: LinePoints, criteria: LineCriteria, closing: ComplexArray | None
) -> list[SolvedLine]:
    """Points added to each line until its centres stand."""
    active = np.arange(len(batch.across))
    allowed = np.full(len(active), criteria.loss)
    done: dict[int, SolvedLine] = {}
    links = loop_links(points, closing)
    while True:
        worst = np.maximum.reduceat(links.losses, points.start)
        ready = worst <= allowed[active]
        on_ready = ready[points.line]
        solved = _settled_lines(
            batch.across[active[ready]],
            points.kept(on_ready),
            links.kept(on_ready),
            criteria,
            closing,
        )
        done.update(
            (i, line) for i, line in zip(active[ready].tolist(), solved, strict=True) if line
        )
        # a third, not a quarter: halving the longest links must be enough to get below it
        allowed[active[ready]] = worst[ready] / 3
        unsettled = np.array([i not in done for i in active.tolist()])
        if not unsettled.any():
            return [done[i] for i in range(len(batch.across))]
        on_unsettled = unsettled[points.line]
        active, points = active[unsettled], points.kept(on_unsettled)
        links = links.kept(on_unsettled)
        finer = _split(batch, active, points, links.losses > allowed[active[points.line]], criteria)
        links = renewed_links(points, links, finer, closing)
        points = finer


def _settled_lines(
    across: FloatArray,
    points: LinePoints,
    links: Links,
    criteria: LineCriteria,
    closing: ComplexArray | None,
) -> list[SolvedLine | None]:
    """The lines whose centres do not move when every second point is left out; None for others."""
    if len(across) == 0:
        return []
    hwcc = hybrid_wannier_centres(links, points.counts)
    halved = points.kept(points.place % 2 == 0)
    hwcc_halved = hybrid_wannier_centres(loop_links(halved, closing), halved.counts)
    moved = np.abs(closest_steps(hwcc_halved, hwcc)).max(axis=1)
    settled = moved <= criteria.point_step * largest_gaps(hwcc)[1]
    singular = worst_singular_values(links, points.counts)
    phases = np.angle(np.linalg.det(links.overlaps))
    parts = [slice(a, a + n) for a, n in zip(points.start, points.counts, strict=True)]
    return [
        SolvedLine(
            float(across[i]),
            hwcc[i],
            float(singular[i]),
            points.along[part],
            points.states[part],
            phases[part],
        )
        if settled[i]
        else None
        for i, part in enumerate(parts)
    ]


def _split(
    batch: _Batch, active: IntArray, points: LinePoints, long: BoolArray, criteria: LineCriteria
) -> LinePoints:
    """The points and one more in the middle of each long link."""
    step = (points.along[points.following] - points.along) % 1.0
    middle, line = (points.along + step / 2)[long], points.line[long]
    shortest = int(step[long].argmin())
    if step[long][shortest] < criteria.finest:
        raise ConvergenceError(
            f"occupied states still turn between points {step[long][shortest]:.0e} apart near "
            f"({batch.across[active[line[shortest]]]:.6f}, {middle[shortest]:.6f}) of the plane"
        )
    return batch.with_more(points, active, line, middle)


class _Batch:
    """Solves points on lines; on lines at 0 and 1/2 one half stands for both (time reversal)."""

    def __init__(self, solve: Solve, across: FloatArray, reversal: Reversal | None) -> None:
        self.across = across
        self._solve = solve
        self._reversal = reversal
        self._folded = np.isin(across, (0.0, 0.5)) & (reversal is not None)

    def first_points(self, n_points: int, extra: FloatArray | None) -> LinePoints:
        lines = np.arange(len(self.across))
        line = np.repeat(lines, n_points)
        along = np.tile(np.arange(n_points) / n_points, len(lines))
        if extra is not None:
            line, along = np.concatenate([line, lines]), np.concatenate([along, extra])
        return _sorted(*self._states(lines, line, along))

    def points_at(self, along: FloatArray) -> LinePoints:
        """Points of a batch of one line."""
        first = np.zeros(len(along), dtype=np.int64)
        return _sorted(*self._states(np.zeros(1, dtype=np.int64), first, along))

    def with_more(
        self, points: LinePoints, active: IntArray, line: IntArray, along: FloatArray
    ) -> LinePoints:
        """The points and new ones (line counts within the active lines) in order."""
        more = self._states(active, line, along)
        have = (points.line, points.along, points.states)
        return _sorted(*(np.concatenate(both) for both in zip(have, more, strict=True)))

    def _states(
        self, active: IntArray, line: IntArray, along: FloatArray
    ) -> tuple[IntArray, FloatArray, ComplexArray]:
        folded = self._folded[active[line]]
        along = np.round(along % 1.0, DECIMALS) % 1.0
        along = np.where(folded & (along > 0.5), np.round(1.0 - along, DECIMALS), along)
        _, index = np.unique(line + along, return_index=True)  # by line, then along it
        line, along = line[index], along[index]
        states = self._solve(np.stack([self.across[active[line]], along], axis=1))
        image = self._folded[active[line]] & (along > 0) & (along < 0.5)
        if self._reversal is None or not image.any():
            return line, along, states
        reversed_states = self._reversal(self.across[active[line[image]]], states[image])
        return (
            np.concatenate([line, line[image]]),
            np.concatenate([along, np.round(1.0 - along[image], DECIMALS)]),
            np.concatenate([states, reversed_states]),
        )


def _sorted(line: IntArray, along: FloatArray, states: ComplexArray) -> LinePoints:
    """Points in order along their lines, each once: a repeated one would confuse the strips."""
    keys, order = np.unique(line + along, return_index=True)
    if len(keys) == len(line) and np.array_equal(order, np.arange(len(order))):
        return LinePoints(np.bincount(line), along, states)
    return LinePoints(np.bincount(line[order]), along[order], states[order])
