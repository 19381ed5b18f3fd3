"""Where the direct gap first closes along H + t V, by following its minima in steps that are safe.

By Weyl's inequality a step dt moves no level by less than dt times the smallest and none by more
than dt times the largest eigenvalue of V, so the gap shrinks by at most dt times their difference
(1 for a projector on orbitals), and a step of the gap over this rate cannot close it. The gap
itself is sampled: a coarse mesh and the minima of the step before, followed downhill. A closing
between the points that were looked at can be missed, and no result of this module is a proof.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.model.fourier import BlochSum, added_sum
from topovet.spectrum.descent import Objective, descend
from topovet.spectrum.eigen import eigenvalues, mesh_points

CLOSED_EV = 2e-3
"""Direct gaps below this count as closed; where exactly is extrapolated from the last two steps."""

REOPENED_EV = 5e-3
"""Direct gaps from here on are wide enough for Wilson loops to be worth their time."""

MESH, FROM_MESH, FOLLOWED, ROUNDS = 6, 6, 6, 6
"""Points of the coarse mesh along each direction; starts from its lowest and from the minima of
the step before; Newton steps for each."""


@dataclass(frozen=True, slots=True)
class Closing:
    """The way from t = 0 towards the end of the range.

    Attributes
    ----------
    at
        t at which the gap closes; None where it stays open.
    k
        Where the gap is smallest at the last t.
    reached
        t up to which was looked.
    finished
        False where the budget ended before the range.
    smallest_ev
        Smallest direct gap on the way.
    n_solves
        Diagonalisations.
    """

    at: float | None
    k: tuple[float, float, float]
    reached: float
    finished: bool
    smallest_ev: float
    n_solves: int


@dataclass(frozen=True, slots=True, eq=False)
class GapMinima:
    """Lowest local minima of the direct gap: k (n, 3), values (n,) eV ascending, solves."""

    k_frac: FloatArray
    values: FloatArray
    n_solves: int


def closing_rate(change: BlochSum) -> float:
    """A bound on the largest minus the smallest eigenvalue of V(k) at any k, eV.

    V(k) is V(0) and, for each pair R, -R, e^{i phi} V(R) + h.c., whose eigenvalues lie within
    +-2 |V(R)|; V(R) = (S - i D) / 2 in the rows of the sum.
    """
    even, odd = change.rows()
    pairs = 0.5 * (even - 1j * odd)
    home = ~change.r_half.any(axis=1)
    onsite = np.linalg.eigvalsh(even[home].sum(axis=0))
    hopping = float(np.linalg.norm(pairs[~home], ord=2, axis=(1, 2)).sum())
    return float(onsite[-1] - onsite[0]) + 4 * hopping


def gap_minima(
    bloch: BlochSum,
    filling: int,
    periodic: tuple[bool, bool, bool],
    known: FloatArray,
) -> GapMinima:
    """Local minima of the direct gap, from a coarse mesh and from points known before.

    Parameters
    ----------
    bloch, filling
        The Hamiltonian and its occupied bands.
    periodic
        Periodic directions.
    known
        (n, 3) points to start from besides.
    """
    objective = Objective(filling, 1, -1)
    mesh = mesh_points([MESH if is_periodic else 1 for is_periodic in periodic])
    half = mesh[mesh[:, 0] <= 0.5]  # time reversal: E(-k) = E(k)
    on_mesh = objective.of(eigenvalues(bloch, half))
    start = np.concatenate([known, half[np.argsort(on_mesh, kind="stable")[:FROM_MESH]]])
    rest = descend(bloch, objective, start, max_rounds=ROUNDS)
    order = np.argsort(rest.values, kind="stable")
    kept = _apart(rest.k_frac[order])[:FOLLOWED]
    solves = len(half) + rest.n_solves
    return GapMinima(rest.k_frac[order][kept], rest.values[order][kept], solves)


def first_closing(
    bloch: BlochSum,
    change: BlochSum,
    filling: int,
    periodic: tuple[bool, bool, bool],
    reach: float,
    *,
    known: FloatArray,
    rate: float,
    max_solves: int,
) -> Closing:
    """Follow the smallest direct gap from t = 0 to t = reach, or until it closes.

    Parameters
    ----------
    bloch, change
        H and V.
    filling, periodic
        Occupied bands and periodic directions.
    reach
        End of the range, of either sign.
    known
        (n, 3) k at which the gap is known to be small.
    rate
        How fast the gap may shrink, eV per unit of t.
    max_solves
        Diagonalisations that may be spent.
    """
    t, n_solves, smallest = 0.0, 0, np.inf
    before: tuple[float, float] | None = None
    while True:
        minima = gap_minima(added_sum(bloch, change, t), filling, periodic, known)
        known, gap = minima.k_frac, float(minima.values[0])
        n_solves, smallest = n_solves + minima.n_solves, min(smallest, gap)
        k = _wrapped(known[0])
        if gap < CLOSED_EV:
            return Closing(_root(before, (t, gap)), k, t, True, smallest, n_solves)
        if t == reach or n_solves > max_solves:
            return Closing(None, k, t, t == reach, smallest, n_solves)
        before = (t, gap)
        step = min(gap / rate, abs(reach - t))
        t = reach if step == abs(reach - t) else t + float(np.sign(reach)) * step


WAY = (0.25, 0.5, 0.75)
"""Parts of the way to an exchange at which the gap is sampled."""


def gap_on_the_way(
    bloch: BlochSum,
    change: BlochSum,
    filling: int,
    periodic: tuple[bool, bool, bool],
    end: float,
    known: FloatArray,
) -> GapMinima:
    """Smallest direct gaps at some points between t = 0 and t = end, one for each: sampled.

    Parameters
    ----------
    bloch, change
        H and V.
    filling, periodic
        Occupied bands and periodic directions.
    end
        t of an exchange, where the gap is 0 in any case.
    known
        (n, 3) k at which the gap is known to be small.
    """
    lowest, values, solves = [], [], 0
    for part in WAY:
        minima = gap_minima(added_sum(bloch, change, part * end), filling, periodic, known)
        known, solves = minima.k_frac, solves + minima.n_solves
        lowest.append(minima.k_frac[0])
        values.append(minima.values[0])
    return GapMinima(np.array(lowest), np.array(values), solves)


def _root(before: tuple[float, float] | None, last: tuple[float, float]) -> float:
    """Where the line through the last two gaps is 0."""
    if before is None or before[1] <= last[1]:
        return last[0]
    return last[0] + (last[0] - before[0]) * last[1] / (before[1] - last[1])


def _apart(k_frac: FloatArray) -> list[int]:
    """Points of the list that none before them is equal to, up to k -> -k and G."""
    kept: list[int] = []
    for i, k in enumerate(k_frac):
        near = [
            min(np.abs(d - np.round(d)).max() for d in (k - k_frac[j], k + k_frac[j])) < 1e-4
            for j in kept
        ]
        if not any(near):
            kept.append(i)
    return kept


def _wrapped(k_frac: FloatArray) -> tuple[float, float, float]:
    x, y, z = (float(c) for c in np.round(0.5 - (0.5 - k_frac) % 1.0, 9) + 0.0)
    return x, y, z
