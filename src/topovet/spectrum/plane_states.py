"""Occupied states on a plane of k, with an account of what they cost and how narrow the gap was."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray
from topovet.errors import ConvergenceError
from topovet.model.fourier import BlochSum, chunks_of_k
from topovet.model.plane import KPlane, bloch_on_plane

Subspace = Callable[[FloatArray, ComplexArray], ComplexArray]
"""From k_frac (n, 3) and occupied states (n, n_orb, n_occ) to the states to be followed."""

SPOTS = 4
"""Places of a narrow gap that are looked into on a plane."""

SPOTS_APART = 0.1
"""Least distance of two of them, in plane coordinates."""

FIRST_STEP = 1 / 24
NEWTON_SHRINKS, PLAIN_SHRINKS = 1 / 4, 1 / 2
FINEST_STEP = 1e-8
MAX_ROUNDS = 24
TINY = 1e-300

SETTLED = 0.95
"""A spot is done when the fitted minimum leaves more than this of the gap found there."""

FIT_ERROR = 0.3
"""Largest error of a fit of squared gaps that is trusted, over the square of the gap found there: a
stencil much wider than a cone foretells nothing of its tip."""

STENCIL = np.array([(x, y) for x in (0, -1, 1) for y in (0, -1, 1)], dtype=float)
TERMS = np.stack(
    [
        np.ones(9),
        STENCIL[:, 0],
        STENCIL[:, 1],
        STENCIL[:, 0] ** 2 / 2,
        STENCIL[:, 1] ** 2 / 2,
        STENCIL[:, 0] * STENCIL[:, 1],
    ],
    axis=1,
)
QUADRATIC = np.linalg.pinv(TERMS)
"""From values on the stencil to those of value, gradient and second derivatives (xx, yy, xy)."""


class PlaneStates:
    """Solves H on a plane; counts the solves, and stops when the budget is spent.

    Parameters
    ----------
    bloch
        Three-dimensional Fourier sum.
    plane
        Where.
    filling
        Occupied bands, 0 < filling < n_orb.
    max_solves
        Largest number of eigenvalue problems.
    subspace
        Part of the occupied space to hand out, such as one eigenspace of a mirror; all of it by
        default.
    positions_frac
        (n_orb, 3) orbital positions: states are handed out in the atomic gauge,
        exp(-2 pi i (k - origin).tau) u(k), in place of the periodic one.

    Attributes
    ----------
    n_solves
        Eigenvalue problems solved so far, with or without eigenvectors.
    smallest_gap_ev, narrowest_xy
        Smallest E[N] - E[N-1] met so far and where.
    """

    def __init__(
        self,
        bloch: BlochSum,
        plane: KPlane,
        filling: int,
        *,
        max_solves: int,
        subspace: Subspace | None = None,
        positions_frac: FloatArray | None = None,
    ) -> None:
        self.plane = plane
        self.max_solves = max_solves
        self.n_solves = 0
        self._filling = filling
        self._bloch = bloch_on_plane(bloch, plane)
        self._subspace = subspace
        self._tau = None
        if positions_frac is not None:
            self._tau = np.array([plane.across, plane.along]) @ positions_frac.T
        self._visited: list[tuple[FloatArray, FloatArray]] = []

    def states_at(self, xy: FloatArray) -> ComplexArray:
        """States (n, n_orb, n_followed) at plane coordinates (n, 2).

        Raises
        ------
        ConvergenceError
            The budget does not allow for this many more solves.
        """
        self._spend(len(xy))
        parts, gaps = [], []
        for part in chunks_of_k(len(xy), self._bloch.n_orb):
            energies, vectors = np.linalg.eigh(self._bloch.lower_at(xy[part]))
            gaps.append(energies[:, self._filling] - energies[:, self._filling - 1])
            states = np.ascontiguousarray(vectors[:, :, : self._filling])
            if self._subspace is not None:
                states = self._subspace(self.plane.k_at(xy[part]), states)
            if self._tau is not None:
                states *= np.exp(-2j * np.pi * (xy[part] @ self._tau))[:, :, None]
            parts.append(states)
        self._visited.append((xy, np.concatenate(gaps)))
        return np.concatenate(parts)

    def gaps_at(self, xy: FloatArray) -> FloatArray:
        """Direct gaps (n,) eV at plane coordinates (n, 2); eigenvalues alone are solved for.

        Raises
        ------
        ConvergenceError
            As `states_at`.
        """
        self._spend(len(xy))
        gaps = []
        for part in chunks_of_k(len(xy), self._bloch.n_orb):
            energies = np.linalg.eigvalsh(self._bloch.lower_at(xy[part]))
            gaps.append(energies[:, self._filling] - energies[:, self._filling - 1])
        self._visited.append((xy, np.concatenate(gaps)))
        return self._visited[-1][1]

    @property
    def visited(self) -> tuple[FloatArray, FloatArray]:
        """Plane coordinates (n, 2) of all solves so far and the direct gaps (n,) eV there."""
        xy, gaps = zip(*self._visited, strict=True)
        return np.concatenate(xy), np.concatenate(gaps)

    def narrowest(self) -> tuple[float, tuple[float, float]]:
        """Smallest direct gap met so far, eV, and where; infinite before the first solve."""
        if not self._visited:
            return np.inf, (0.0, 0.0)
        xy, gaps = self.visited
        x, y = (float(c) for c in xy[gaps.argmin()] % 1.0)
        return float(gaps.min()), (x, y)

    @property
    def bytes_per_k(self) -> int:
        """Memory that following the states of one k takes, working arrays included."""
        return 16 * self._filling * (3 * self._bloch.n_orb + 8 * self._filling)

    def closing(self, turns: FloatArray) -> ComplexArray | None:
        """exp(-2 pi i G.tau) for G = turns[..., 0] across + turns[..., 1] along, (..., n_orb).

        The factors that take states at (x, y) to those at (x, y) + turns; None in the periodic
        gauge, where there is nothing to do.
        """
        return None if self._tau is None else np.asarray(np.exp(-2j * np.pi * (turns @ self._tau)))

    def _spend(self, n: int) -> None:
        if self.n_solves + n > self.max_solves:
            raise ConvergenceError(f"the budget of {self.max_solves} eigenvalue problems is spent")
        self.n_solves += n


@dataclass(frozen=True, slots=True, eq=False)
class NarrowSpots:
    """Places where the direct gap is small.

    Attributes
    ----------
    xy
        (n, 2) plane coordinates in [0, 1).
    gaps_ev
        (n,) direct gaps there.
    widths
        (n,) distance, in plane coordinates, over which the gap grows to sqrt(2) of itself along
        its steepest direction: the Berry curvature of a Dirac cone is spread that far.
    """

    xy: FloatArray
    gaps_ev: FloatArray
    widths: FloatArray


def narrow_spots(states: PlaneStates) -> NarrowSpots:
    """Where the direct gap is narrowest, from the points solved so far.

    The lowest points, apart from each other, are followed downhill. Near a small gap its square is
    quadratic in k (Dirac cones of any mass), so a quadratic is fitted to the squares on a stencil
    that shrinks around its minimum. These are places to look at more closely, not a proof that
    nothing lower exists.
    """
    spots = _lowest_apart(*states.visited)
    centre, step = spots.copy(), np.full(len(spots), FIRST_STEP)
    best, steepest = np.full((2, len(spots)), np.inf)
    active = np.arange(len(spots))
    for _ in range(MAX_ROUNDS):
        around = centre[active, None] + step[active, None, None] * STENCIL
        gaps = states.gaps_at(around.reshape(-1, 2)).reshape(-1, 9)
        fit = _fit_quadratic(gaps**2)
        lowest, winner = gaps.min(axis=1), gaps.argmin(axis=1)
        better = lowest < best[active]
        best[active] = np.where(better, lowest, best[active])
        found = around[np.arange(len(active)), winner]
        spots[active] = np.where(better[:, None], found, spots[active])
        steepest[active] = fit.steepest / step[active] ** 2
        centre[active] += step[active, None] * fit.move
        trusted = fit.inside & (fit.error < FIT_ERROR * best[active] ** 2)
        settled = trusted & (fit.value > (SETTLED * best[active]) ** 2)
        # a lowest point on the rim means that the minimum lies further out: go there, same step
        shrink = np.where(winner == 0, PLAIN_SHRINKS, 1.0)
        step[active] *= np.where(fit.inside, NEWTON_SHRINKS, shrink)
        active = active[~settled & (step[active] > FINEST_STEP)]
        if len(active) == 0:
            break
    return NarrowSpots(spots % 1.0, best, best * np.sqrt(2 / np.maximum(steepest, TINY)))


def _lowest_apart(xy: FloatArray, gaps: FloatArray) -> FloatArray:
    spots: list[FloatArray] = []
    left = gaps.copy()
    while len(spots) < SPOTS and np.isfinite(left.min()):
        spot = xy[left.argmin()]
        spots.append(spot)
        # -k is the same spot: equal gaps there under time reversal, and no harm without it
        for image in (spot, -spot):
            apart = (xy - image + 0.5) % 1.0 - 0.5
            left[np.hypot(*apart.T) <= SPOTS_APART] = np.inf
    return np.array(spots)


@dataclass(frozen=True, slots=True, eq=False)
class _Fit:
    """A quadratic on the stencil, in units of its step.

    Attributes
    ----------
    move
        (n, 2) way to its minimum where that lies inside the stencil, else to the lowest point.
    inside
        (n,) which of the two.
    value
        (n,) at the minimum, by the fit.
    error
        (n,) largest distance of the fit from the values.
    steepest
        (n,) largest second derivative along any direction.
    """

    move: FloatArray
    inside: BoolArray
    value: FloatArray
    error: FloatArray
    steepest: FloatArray


def _fit_quadratic(values: FloatArray) -> _Fit:
    """Fit to values (n, 9) on the stencil."""
    coefficients = values @ QUADRATIC.T
    middle, g_x, g_y, h_xx, h_yy, h_xy = coefficients.T
    determinant, mean = h_xx * h_yy - h_xy**2, (h_xx + h_yy) / 2
    convex = (determinant > 0) & (h_xx > 0)
    scale = 1 / np.where(convex, determinant, 1.0)
    newton = scale * np.stack([h_xy * g_y - h_yy * g_x, h_xy * g_x - h_xx * g_y])
    inside = convex & (np.abs(newton).max(axis=0) <= 1.0)
    lowest = STENCIL[values.argmin(axis=1)]
    return _Fit(
        move=np.asarray(np.where(inside[:, None], newton.T, lowest)),
        inside=inside,
        value=middle + (g_x * newton[0] + g_y * newton[1]) / 2,
        error=np.abs(values - coefficients @ TERMS.T).max(axis=1),
        steepest=mean + np.sqrt(((h_xx - h_yy) / 2) ** 2 + h_xy**2),
    )
