"""One line of k_par followed: its window, its energy curves, the levels that cross them."""

from __future__ import annotations

import itertools
from dataclasses import dataclass, field

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.boundary.flow import (
    SurfacePhases,
    largest_moves,
    reference_angle,
    rising_levels,
    surface_phases,
)
from topovet.boundary.greens import ARRAYS_PER_ENERGY, decimate
from topovet.boundary.layers import CHUNK_BYTES, LayerStack, principal_blocks
from topovet.boundary.projected import largest_step, projected_edges
from topovet.boundary.results import Crossing
from topovet.spectrum.eigen import map_threads

SIDES = ("upper", "lower")

MOST_SKEW = 1e-6
"""Largest |eps - eps†| over |eps| of a half-crystal in the gap, where it is Hermitian: the digits
that decimation left."""


@dataclass(frozen=True, slots=True)
class LineCriteria:
    """When a count is believed.

    Attributes
    ----------
    fractions
        Where the energy curves run in the window, 0 to 1; tried in this order.
    curves
        Curves that must be resolved on both terminations, and agree.
    intervals
        Intervals that a line starts with.
    window_share
        H may change from point to point by this share of the window, in norm, so that no level can
        pass through the window in between; at most the least distance of a curve from its edges,
        so that the curve stays inside.
    most_move
        Largest angle, radians, that phases may move by from point to point.
    end_share
        Least |a| / gamma at the two ends, where a level at the curve would be counted at random.
    most_points
        k_par on one line.
    least_window_ev
        A window narrower than this is none.
    most_layer
        Orbitals in a principal layer beyond which the lines are not followed.
    both_routes
        Whether the strong index is found along both directions of the surface even where one gives
        it.
    least_margin_ev
        Least |a| at the two ends, and least window, whatever the rest: what levels may be off by.
    """

    fractions: tuple[float, ...]
    curves: int
    intervals: int
    window_share: float = 0.4
    most_move: float = 0.7
    end_share: float = 0.01
    most_points: int = 400
    least_window_ev: float = 1e-4
    most_layer: int = 160
    both_routes: bool = False
    least_margin_ev: float = 0.0


class Unfollowed(Exception):  # noqa: N818  (an answer, not an error)
    """The line cannot be followed; `applicable` is False where no energy curve exists on it."""

    def __init__(self, reason: str, *, applicable: bool = True) -> None:
        super().__init__(reason)
        self.applicable = applicable


@dataclass(slots=True)
class Line:
    """A straight line of k_par, with the window of the bulk known where it was looked at.

    Attributes
    ----------
    stack, filling
        The crystal by planes, and its occupied bands per cell.
    start, end
        (2,) fractional ends.
    criteria
        See `LineCriteria`.
    n_solves, n_bulk_solves
        Half-crystals and bulk eigenvalue problems solved so far.
    """

    stack: LayerStack
    filling: int
    start: FloatArray
    end: FloatArray
    criteria: LineCriteria
    n_solves: int = 0
    n_bulk_solves: int = 0
    _edges: dict[float, tuple[float, float]] = field(default_factory=dict)

    def k_at(self, t: FloatArray) -> FloatArray:
        """(n, 2) k_par of positions t from 0 to 1."""
        return np.asarray(self.start + np.asarray(t)[:, None] * (self.end - self.start))

    def narrowest(self) -> tuple[float, float]:
        """Smallest window met, eV, and its t."""
        t = min(self._edges, key=lambda t: self._edges[t][1] - self._edges[t][0])
        return self._edges[t][1] - self._edges[t][0], t

    def resolve_window(self) -> list[float]:
        """Points so dense that neither the window closes nor a level passes it between them.

        Raises
        ------
        Unfollowed
            The projected bands leave no window somewhere, or the points run out.
        """
        points = [i / self.criteria.intervals for i in range(self.criteria.intervals + 1)]
        self.look(points)
        pairs = list(itertools.pairwise(points))
        while pairs:
            wide = self._too_wide(pairs)
            middles = [(a + b) / 2 for a, b in wide]
            points = sorted([*points, *middles])
            if len(points) > self.criteria.most_points:
                width, t = self.narrowest()
                raise Unfollowed(
                    f"more than {self.criteria.most_points} points are needed where the window "
                    f"between the projected bulk bands is {1e3 * width:.2g} meV ({self._name(t)})"
                )
            self.look(middles)
            pairs = [pair for a, b in wide for pair in ((a, (a + b) / 2), ((a + b) / 2, b))]
        return points

    def follow(self, points: list[float], fraction: float, gamma_ev: float) -> list[Crossing]:
        """Levels of both half-crystals that cross the curve at a fraction of the window."""
        walk = _Walk(self, fraction, gamma_ev)
        try:
            for batch in _overlapping(points, self._batch()):
                walk.through(batch)
        except Unfollowed as stopped:
            return [walk.unresolved(i, str(stopped)) for i in (0, 1)]
        return [walk.crossing(i) for i in (0, 1)]

    def inverse_greens(self, t: list[float], fraction: float) -> tuple[ComplexArray, ComplexArray]:
        """A = E - eps of the upper and the lower half-crystal on the curve, (n, size, size) eV.

        Raises
        ------
        Unfollowed
            The coupling does not die out: there are bulk states at the curve; or a slab of 2^i - 1
            layers has a level there, which costs digits.
        """
        self.look(t)
        edges = np.array([self._edges[x] for x in t])
        energy = edges[:, 0] + fraction * (edges[:, 1] - edges[:, 0])
        planes = self.stack.planes_at(self.k_at(np.array(t)))
        try:
            found = decimate(*principal_blocks(planes), energy)
        except np.linalg.LinAlgError as error:
            raise Unfollowed("a slab has a level exactly at the curve") from error
        self.n_solves += len(t)
        if not found.converged.all():
            bad = t[int(np.flatnonzero(~found.converged)[0])]
            raise Unfollowed(f"the bulk has states at the curve, at {self._name(bad)}")
        at = energy[:, None, None] * np.eye(self.stack.layer_size)
        if max(_skewness(found.upper), _skewness(found.lower)) > MOST_SKEW:
            raise Unfollowed("digits are lost: a slab has a level too close to the curve")
        return at - found.upper, at - found.lower

    def energies(self, fraction: float) -> tuple[float, float]:
        """The curve at the two ends, eV."""
        (top_a, bottom_a), (top_b, bottom_b) = self._edges[0.0], self._edges[1.0]
        return top_a + fraction * (bottom_a - top_a), top_b + fraction * (bottom_b - top_b)

    def look(self, t: list[float]) -> None:
        """Solve for the window at positions where it is not known yet.

        Raises
        ------
        Unfollowed
            There is none somewhere.
        """
        new = [x for x in t if x not in self._edges]
        if not new:
            return
        found = projected_edges(self.stack, self.k_at(np.array(new)), self.filling)
        self.n_bulk_solves += found.n_solves
        for x, top, bottom in zip(new, found.top_ev, found.bottom_ev, strict=True):
            self._edges[x] = (float(top), float(bottom))
        width, t_min = self.narrowest()
        if width < max(self.criteria.least_window_ev, self.criteria.least_margin_ev):
            how = f"overlap by {-1e3 * width:.3g}" if width < 0 else f"are {1e3 * width:.2g} apart"
            raise Unfollowed(
                f"no energy curve separates the projected bulk bands: they {how} meV at "
                f"{self._name(t_min)}",
                applicable=False,
            )

    def _too_wide(self, pairs: list[tuple[float, float]]) -> list[tuple[float, float]]:
        def steps(part: list[tuple[float, float]]) -> FloatArray:
            left = self.stack.planes_at(self.k_at(np.array([a for a, _ in part])))
            right = self.stack.planes_at(self.k_at(np.array([b for _, b in part])))
            return largest_step(self.stack, left, right)

        batch = self._batch()
        parts = [pairs[i : i + batch] for i in range(0, len(pairs), batch)]
        moved = np.concatenate(map_threads(steps, parts))
        windows = np.array(
            [min(self._edges[x][1] - self._edges[x][0] for x in pair) for pair in pairs]
        )
        wide = moved > self.criteria.window_share * windows
        return [pair for pair, is_wide in zip(pairs, wide, strict=True) if is_wide]

    def _batch(self) -> int:
        # two unitaries with their eigenvectors are kept for each point besides
        per_point = 16 * self.stack.layer_size**2 * (ARRAYS_PER_ENERGY + 8)
        return int(np.clip(CHUNK_BYTES // per_point, 2, 32))

    def _name(self, t: float) -> str:
        return "k_par = (" + ", ".join(f"{c:.4f}" for c in self.k_at(np.array([t]))[0]) + ")"


class _Walk:
    """From point to point along one curve, both terminations at once."""

    def __init__(self, line: Line, fraction: float, gamma_ev: float) -> None:
        self._line, self._fraction, self._gamma = line, fraction, gamma_ev
        self._at: dict[float, tuple[SurfacePhases, SurfacePhases]] = {}
        self._net = [0, 0]
        self._move = [0.0, 0.0]
        self._ends: list[list[float]] = [[], []]
        self._points = 0

    def through(self, points: list[float]) -> None:
        """Count over a stretch of points; its first must be the last of the stretch before."""
        self._solve([t for t in points if t not in self._at])
        pairs = list(itertools.pairwise(points))
        while pairs:
            wide = [pair for pair in pairs if not self._count(*pair)]
            if self._points + len(wide) > self._line.criteria.most_points:
                raise Unfollowed(
                    f"phases still move by more than {self._line.criteria.most_move} between "
                    f"{self._line.criteria.most_points} points"
                )
            self._solve([(a + b) / 2 for a, b in wide])
            pairs = [pair for a, b in wide for pair in ((a, (a + b) / 2), ((a + b) / 2, b))]
        self._at = {points[-1]: self._at[points[-1]]}

    def crossing(self, side: int) -> Crossing:
        line = self._line
        margin = min(self._ends[side])
        least = max(line.criteria.end_share * self._gamma, line.criteria.least_margin_ev)
        close = margin < least
        reason = "a surface level lies at the curve at an end of the line" if close else ""
        net = None if close else self._net[side]
        return self._entry(side, "unresolved" if close else "ok", reason, net, margin)

    def unresolved(self, side: int, reason: str) -> Crossing:
        return self._entry(side, "unresolved", reason, None, float("nan"))

    def _entry(
        self, side: int, status: str, reason: str, net: int | None, margin: float
    ) -> Crossing:
        line = self._line
        return Crossing(
            start=tuple(line.start.tolist()),
            end=tuple(line.end.tolist()),
            termination=SIDES[side],
            fraction=self._fraction,
            status=status,
            reason=reason,
            net=net,
            points=self._points,
            largest_move=self._move[side],
            margin_ev=margin,
            energies_ev=line.energies(self._fraction),
        )

    def _solve(self, t: list[float]) -> None:
        if not t:
            return

        def solve(part: list[float]) -> list[tuple[SurfacePhases, SurfacePhases]]:
            both = self._line.inverse_greens(part, self._fraction)
            upper, lower = (surface_phases(a, self._gamma) for a in both)
            return [(_one(upper, i), _one(lower, i)) for i in range(len(part))]

        parts = [t[i : i + 4] for i in range(0, len(t), 4)]
        self._line.look(t)
        for part, solved in zip(parts, map_threads(solve, parts), strict=True):
            self._at.update(zip(part, solved, strict=True))
        self._points += len(t)
        for end in {0.0, 1.0}.intersection(t):
            for side in (0, 1):
                self._ends[side].append(float(self._at[end][side].nearest_ev[0]))

    def _count(self, a: float, b: float) -> bool:
        """Add the flow from a to b for both terminations; False where the step is too wide."""
        flows, moves = [], []
        for side in (0, 1):
            before, after = self._at[a][side], self._at[b][side]
            move = float(largest_moves(before.unitary, after.unitary)[0])
            reference, room = reference_angle(before.phases[0])
            if move > min(self._line.criteria.most_move, room):
                return False
            moves.append(move)
            flows.append(rising_levels(before.phases[0], after.phases[0], reference))
        for side in (0, 1):
            self._net[side] += flows[side]
            self._move[side] = max(self._move[side], moves[side])
        return True


def _one(phases: SurfacePhases, i: int) -> SurfacePhases:
    part = slice(i, i + 1)
    return SurfacePhases(phases.unitary[part], phases.phases[part], phases.nearest_ev[part])


def _skewness(effective: ComplexArray) -> float:
    skew = np.abs(effective - effective.conj().transpose(0, 2, 1)).max()
    return float(skew / np.abs(effective).max())


def _overlapping(points: list[float], batch: int) -> list[list[float]]:
    """Stretches of points that share their ends."""
    return [points[i : i + batch + 1] for i in range(0, len(points) - 1, batch)]
