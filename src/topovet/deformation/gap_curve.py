"""The smallest direct gap along the way: attained values, and where they vanish.

A few lambda are searched from a mesh of k. The minima found there are starting points for all
others, and for a descent in k and lambda together, whose square-of-the-gap is as smooth as at fixed
lambda: it runs into closings between the values of lambda that were looked at.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from topovet.arrays import FloatArray
from topovet.deformation.path import Path
from topovet.deformation.results import GapSampleAt, Point
from topovet.spectrum.descent import FINE_MULTIPLET, Objective, descend
from topovet.spectrum.eigen import eigenvalues, mesh_eigenvalues
from topovet.spectrum.gap import GAPLESS_EV, lowest_direct_gaps

ROUNDS = 30
KEPT_PER_LAMBDA = 6
"""Minima of each mesh search that later searches start from."""

FOLLOWED = 6
"""Of all starting points so many, those with the smallest gaps, are followed at each lambda."""

DIFFERENT_K = 1e-3
"""Starting points nearer than this in every component are one."""

BOUNDARY = 1e-5
"""Ends of a gapless range of lambda are found to this."""

FIRST_STEP = 1e-4


@dataclass(slots=True)
class GapCurve:
    """Searches the smallest direct gap at any lambda; keeps what it found.

    Attributes
    ----------
    path, filling
        What is searched.
    mesh
        Points of k for `survey`.
    periodic
        Periodic directions; k is 0 along the others.
    even
        Whether E(-k) = E(k) may be used on it.
    found
        Smallest gap and its k by lambda.
    starts
        (n, 3) k from which searches start.
    """

    path: Path
    filling: int
    mesh: tuple[int, int, int]
    periodic: tuple[bool, bool, bool]
    even: bool
    found: dict[float, GapSampleAt] = field(default_factory=dict)
    starts: FloatArray = field(default_factory=lambda: np.empty((0, 3)))

    @property
    def objective(self) -> Objective:
        return Objective(self.filling, 1, -1)

    def survey(self, lams: FloatArray) -> None:
        """Search from the mesh at each lambda, then from all minima met anywhere."""
        pools = []
        for lam in lams.tolist():
            bloch = self.path.bloch_at(lam)
            energies = mesh_eigenvalues(bloch, self.mesh, even=self.even)
            values, k_frac = lowest_direct_gaps(bloch, energies, self.filling)
            pools.append(_distinct(k_frac)[:KEPT_PER_LAMBDA])
            self._note(lam, float(values[0]), k_frac[0])
        self.add_starts(np.concatenate(pools))
        for lam in lams.tolist():
            self.at(lam, again=True)

    def add_starts(self, k_frac: FloatArray) -> None:
        """More k to start from, those of closings for instance."""
        self.starts = _distinct(np.concatenate([self.starts, k_frac]))

    def at(self, lam: float, *, again: bool = False) -> GapSampleAt:
        """Smallest gap met at lambda."""
        if lam not in self.found or again:
            bloch = self.path.bloch_at(lam)
            coarse = descend(bloch, self.objective, self._lowest_starts(lam), max_rounds=ROUNDS)
            best = np.argsort(coarse.values, kind="stable")[:2]
            fine = descend(
                bloch,
                self.objective,
                coarse.k_frac[best],
                max_rounds=ROUNDS,
                multiplet=FINE_MULTIPLET,
            )
            leader = int(fine.values.argmin())
            self._note(lam, float(fine.values[leader]), fine.k_frac[leader])
        return self.found[lam]

    def note(self, lam: float, gap_ev: float, k_frac: FloatArray) -> None:
        """Keep a value met by somebody else, and start from there as well."""
        self.add_starts(np.asarray(k_frac)[None, :3])
        self._note(lam, gap_ev, k_frac)

    def closings(self) -> tuple[GapSampleAt, ...]:
        """Points (k, lambda) with a vanishing gap, from descents in both, by ascending lambda."""
        lams = np.array(sorted(self.found))
        start = np.concatenate(
            [np.column_stack([k := self._lowest_starts(lam), np.full(len(k), lam)]) for lam in lams]
        )
        met = descend(self.path, self.objective, start, max_rounds=ROUNDS)
        inside = (met.k_frac[:, 3] >= 0) & (met.k_frac[:, 3] <= 1)
        closed = np.flatnonzero(inside & (met.values < GAPLESS_EV))
        for i in closed.tolist():
            self.note(float(met.k_frac[i, 3]), float(met.values[i]), met.k_frac[i, :3])
        return tuple(s for s in self.samples() if s.gap_ev < GAPLESS_EV)

    def samples(self) -> tuple[GapSampleAt, ...]:
        """All values by ascending lambda."""
        return tuple(self.found[lam] for lam in sorted(self.found))

    def floor(self, lo: FloatArray, hi: FloatArray) -> FloatArray:
        """(n,) smallest gap over each range, eV: values met, and straight lines between them."""
        samples = self.samples()
        lams = np.array([s.lam for s in samples])
        gaps = np.array([s.gap_ev for s in samples])
        ends = np.minimum(np.interp(lo, lams, gaps), np.interp(hi, lams, gaps))
        inside = (lams >= np.asarray(lo)[:, None]) & (lams <= np.asarray(hi)[:, None])
        return np.asarray(np.minimum(ends, np.where(inside, gaps, np.inf).min(axis=1)))

    def lowest_in(self, lo: float, hi: float) -> GapSampleAt:
        """Smallest value met in a range; its ends are looked at."""
        self.at(lo)
        self.at(hi)
        return min((s for s in self.samples() if lo <= s.lam <= hi), key=lambda s: s.gap_ev)

    def boundary(self, closed: float, towards: float) -> float:
        """Where the gap opens on the way from a closed lambda to an end; that end if it does not.

        The last lambda at which the attained gap is below `GAPLESS_EV` before the first at which it
        is not, to `BOUNDARY`.
        """
        step, sign = FIRST_STEP, float(np.sign(towards - closed))
        if sign == 0:
            return closed
        inner = closed
        while True:
            outer = closed + sign * step
            if sign * (outer - towards) >= 0:
                outer = towards
            if self.at(outer).gap_ev >= GAPLESS_EV:
                break
            if outer == towards:
                return towards
            inner, step = outer, 2 * step
        while abs(outer - inner) > BOUNDARY:
            middle = (inner + outer) / 2
            if self.at(middle).gap_ev >= GAPLESS_EV:
                outer = middle
            else:
                inner = middle
        return inner

    def _lowest_starts(self, lam: float) -> FloatArray:
        """(n, 3) k to start from at lambda."""
        gaps = self.objective.of(eigenvalues(self.path.bloch_at(lam), self.starts))
        return self.starts[np.argsort(gaps, kind="stable")[:FOLLOWED]]

    def _note(self, lam: float, gap_ev: float, k_frac: FloatArray) -> None:
        known = self.found.get(lam)
        if known is None or gap_ev < known.gap_ev:
            self.found[lam] = GapSampleAt(lam, gap_ev, _home(np.where(self.periodic, k_frac, 0.0)))


def _home(k_frac: FloatArray) -> Point:
    x, y, z = (float(c) for c in np.round(k_frac - np.ceil(k_frac - 0.5 - 1e-9), 9) + 0.0)
    return x, y, z


def _distinct(k_frac: FloatArray) -> FloatArray:
    """The points in order, without those that repeat an earlier one modulo a reciprocal vector."""
    kept: list[FloatArray] = []
    for k in k_frac:
        away = np.array([k - other for other in kept]).reshape(-1, 3)
        if not np.any(np.abs(away - np.round(away)).max(axis=1) < DIFFERENT_K):
            kept.append(k)
    return np.array(kept).reshape(-1, 3)
