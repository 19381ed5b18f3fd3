"""Local minima of a gap or a band edge: Newton steps for many starting points together.

Second-order perturbation theory gives gradient and second derivatives of a level at the price of
one diagonalisation. For a multiplet B (levels closer than a tolerance) the mean energy has

    d_i E  = mean_b <b|d_i H|b>
    d_ij E = mean_b <b|d_ij H|b>
             + 2 Re mean_b sum_{m not in B} <b|d_i H|m><m|d_j H|b> / (E_b - E_m)

(Kato, Perturbation Theory for Linear Operators, II.2: the weighted mean of a multiplet is smooth
where its members are not). Near a small gap the *square* of the gap is quadratic in k, however
small it is, so the square is what is minimised. A minimum of a gap never lies where two levels of
one side cross: there the gap is the smaller of two smooth functions.

A step is taken only if the exact objective falls; the derivatives need not be trusted.

Where symmetry makes the slope vanish a point may rest that is no minimum: on a saddle, along whose
negative curvature no Newton step leads (the hard case of Moré and Sorensen, SIAM J. Sci. Stat.
Comput. 4, 553 (1983), from memory), or on a kink, where a degenerate multiplet splits linearly (a
TRIM of a crystal without inversion) while its mean knows nothing of it. There, and only there, a
few steps aside are tried.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Protocol

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from topovet.spectrum.eigen import map_threads

MULTIPLET, FINE_MULTIPLET = 0.02, 1e-4
"""Levels closer than this part of the gap between bands N-1 and N are one multiplet: at first, and
once at rest, where the split levels of a crystal without inversion may lie a little lower."""

MULTIPLET_LEAST_EV = 1e-7
LEAST_SPLITTING_EV = 1e-9
LEAST_CURVATURE = 1e-9
FIRST_RADIUS, LARGEST_RADIUS = 0.03, 0.06
SETTLED_STEP = 1e-9
"""Steps in fractional k below which a point is at rest."""

NEAR_REST = 1e-3
"""Newton steps below this lead to a resting point, be it a minimum or not."""

LEAST_ASIDE = 1e-4
"""Steps aside begin at `FIRST_RADIUS`, are quartered where they do not lead down, and end here."""

NEGATIVE = 1e-7
"""Curvatures below minus this part of the largest are negative, not rounding."""

LEAST_GAIN_EV = 1e-5
"""Steps aside from a kink that would win less to first order are not tried."""

CLOSED_EV = 1e-6
"""Below gaps as small as this there is nothing to find."""

K_AT_A_TIME = 32
"""The matrices of a k fill some 100 n_orb^2 numbers: this many stay near the processor."""


class SmoothHamiltonian(Protocol):
    """A Hermitian matrix with two derivatives: a `BlochSum`, or one that depends on more than k."""

    def lower_at(self, k_frac: FloatArray) -> ComplexArray: ...

    def gradient(self, k_frac: FloatArray) -> ComplexArray: ...

    def hessian(self, k_frac: FloatArray) -> ComplexArray: ...


@dataclass(frozen=True, slots=True)
class Objective:
    """What is minimised: a combination of the two levels beside the gap at a filling.

    Attributes
    ----------
    filling
        Number of bands below the gap.
    upper, lower
        f = upper E[N] + lower E[N-1]; (1, -1) is the direct gap, (0, -1) the valence edge turned
        over, (1, 0) the conduction edge.
    """

    filling: int
    upper: float
    lower: float

    @property
    def squared(self) -> bool:
        """Whether f is a gap, whose square is the smooth quantity."""
        return self.upper != 0 and self.lower != 0

    def of(self, energies: FloatArray) -> FloatArray:
        """f (...) from energies (..., n_orb)."""
        n = self.filling
        return self.upper * energies[..., n] + self.lower * energies[..., n - 1]


@dataclass(frozen=True, slots=True, eq=False)
class LocalMinima:
    """Where the starting points came to rest, (n, d), f there (n,) eV, and the solves it took."""

    k_frac: FloatArray
    values: FloatArray
    n_solves: int


def descend(
    bloch: SmoothHamiltonian,
    objective: Objective,
    start: FloatArray,
    *,
    max_rounds: int,
    multiplet: float = MULTIPLET,
) -> LocalMinima:
    """Follow the objective downhill from each start by damped Newton steps.

    Steps are cut to a radius of trust, which grows where the objective falls and shrinks where it
    does not; negative curvatures are taken by their absolute value, so that saddles are left, and
    points that come to rest on a saddle or a kink step aside.

    Parameters
    ----------
    bloch
        The Hamiltonian.
    objective
        What is minimised.
    start
        (n, d) fractional k, d = 3 for a `BlochSum`.
    max_rounds
        Most steps for each start.
    multiplet
        Levels closer than this part of the gap are one.
    """
    k_frac = np.array(start, dtype=float)
    here = _local_models(bloch, objective, k_frac, multiplet)
    radius, aside = np.full((2, len(k_frac)), FIRST_RADIUS)
    moving, n_solves = np.arange(len(k_frac)), len(k_frac)
    for _ in range(max_rounds):
        step, leaves = _steps(here.at(moving), radius[moving], aside[moving], objective)
        length = np.abs(step).max(axis=1)
        goes_on = length > SETTLED_STEP
        moving, step, length, leaves = (x[goes_on] for x in (moving, step, length, leaves))
        if len(moving) == 0:
            break
        trial = k_frac[moving] + step
        new = _local_models(bloch, objective, trial, multiplet)
        n_solves += len(moving)
        falls = new.value < here.value[moving]
        reach = np.where(leaves, length, radius[moving])
        reach = np.where(falls, np.minimum(2 * reach, LARGEST_RADIUS), length / 4)
        radius[moving[falls | ~leaves]] = reach[falls | ~leaves]
        aside[moving[leaves]] = reach[leaves]
        k_frac[moving[falls]] = trial[falls]
        here.set(moving[falls], new.at(np.flatnonzero(falls)))
    return LocalMinima(k_frac, here.value, n_solves)


@dataclass(frozen=True, slots=True, eq=False)
class _Models:
    """f (n,), slope (n, d) and second derivatives (n, d, d) of f or f squared; kink (n, d).

    The kink is by how much f falls to first order, eV per unit of k, on either side of a point
    where multiplets split.
    """

    value: FloatArray
    slope: FloatArray
    curve: FloatArray
    kink: FloatArray

    def at(self, which: IntArray) -> _Models:
        return _Models(*(getattr(self, f.name)[which] for f in fields(self)))

    def set(self, which: IntArray, new: _Models) -> None:
        for f in fields(self):
            getattr(self, f.name)[which] = getattr(new, f.name)


def _steps(
    here: _Models, radius: FloatArray, aside: FloatArray, objective: Objective
) -> tuple[FloatArray, BoolArray]:
    """(n, d) next steps, and (n,) which of them leave a point at rest that is no minimum."""
    curvatures, axes = np.linalg.eigh(here.curve)
    along = np.einsum("kij,ki->kj", axes, here.slope)
    step = -np.einsum("kij,kj->ki", axes, along / np.maximum(np.abs(curvatures), LEAST_CURVATURE))
    length = np.abs(step).max(axis=1)
    negative = curvatures[:, 0] < -np.maximum(NEGATIVE * curvatures[:, -1], LEAST_CURVATURE)
    kinked = here.kink.max(axis=1) * aside > LEAST_GAIN_EV
    leaves = (length < NEAR_REST) & (aside > LEAST_ASIDE) & (negative | kinked)
    if objective.squared:
        leaves &= here.value > CLOSED_EV
    off = np.where(
        kinked[:, None],
        np.eye(here.slope.shape[1])[here.kink.argmax(axis=1)],
        axes[:, :, 0] * np.where(along[:, :1] > 0, -1.0, 1.0),
    )
    off *= (aside / np.abs(off).max(axis=1))[:, None]
    step *= np.minimum(1.0, radius / np.maximum(length, 1e-300))[:, None]
    return np.where(leaves[:, None], off, step), leaves


def _local_models(
    bloch: SmoothHamiltonian, objective: Objective, k_frac: FloatArray, multiplet: float
) -> _Models:
    """The models at k (n, d)."""
    parts = map_threads(
        lambda part: _local_model(bloch, objective, part, multiplet),
        [k_frac[i : i + K_AT_A_TIME] for i in range(0, len(k_frac), K_AT_A_TIME)],
    )
    columns = ([getattr(part, f.name) for part in parts] for f in fields(_Models))
    return _Models(*(np.concatenate(column) for column in columns))


def _local_model(
    bloch: SmoothHamiltonian, objective: Objective, k_frac: FloatArray, multiplet: float
) -> _Models:
    energies, states = np.linalg.eigh(bloch.lower_at(k_frac))
    value = objective.of(energies)
    upper, lower = _multiplets(energies, objective.filling, multiplet)
    slope, kink = np.zeros((2, *k_frac.shape))
    curve = np.zeros((*k_frac.shape, k_frac.shape[1]))
    first, second = bloch.gradient(k_frac), bloch.hessian(k_frac)
    fine = _multiplets(energies, objective.filling, FINE_MULTIPLET)
    for weight, members, together in zip(
        (objective.upper, objective.lower), (upper, lower), fine, strict=True
    ):
        if weight != 0:
            mean_slope, mean_curve, split = _mean_derivatives(
                energies, states, members, first, second, together
            )
            slope += weight * mean_slope
            curve += weight * mean_curve
            kink += abs(weight) * split
    if objective.squared:
        curve = 2 * (slope[:, :, None] * slope[:, None, :] + value[:, None, None] * curve)
        slope = 2 * value[:, None] * slope
    return _Models(value, slope, curve, kink)


def _multiplets(
    energies: FloatArray, filling: int, multiplet: float
) -> tuple[BoolArray, BoolArray]:
    """Which levels count as one with E[N] and with E[N-1], (n_k, n_orb) each."""
    top, bottom = energies[:, filling - 1, None], energies[:, filling, None]
    tolerance = multiplet * (bottom - top) + MULTIPLET_LEAST_EV
    empty = np.arange(energies.shape[1]) >= filling
    return empty & (energies < bottom + tolerance), ~empty & (energies > top - tolerance)


def _mean_derivatives(
    energies: FloatArray,
    states: ComplexArray,
    members: BoolArray,
    first: ComplexArray,
    second: ComplexArray,
    together: BoolArray,
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """First (n, d) and second (n, d, d) derivatives of the mean energy of a multiplet.

    And the linear splitting (n, d) of those members that lie `together`: the root mean square of
    the first-order energies about their mean.
    """
    columns = np.flatnonzero(members.any(axis=0))  # neighbours; few
    weights = members[:, columns] / members.sum(axis=1)[:, None]
    kets = states[:, None, :, columns]
    coupling = states.conj().transpose(0, 2, 1)[:, None] @ (first @ kets)  # (k, i, m, b)
    inside = coupling[:, :, columns]
    slope = np.einsum("kibb,kb->ki", inside, weights).real
    split = _splitting(inside, together[:, columns])
    gaps = energies[:, None, columns] - energies[:, :, None]  # (k, m, b)
    # at a closing the other side is as good as degenerate: a large curvature, but a finite one
    gaps = np.where(np.abs(gaps) < LEAST_SPLITTING_EV, LEAST_SPLITTING_EV, gaps)
    outside = np.where(members[:, :, None], 0.0, weights[:, None, :] / gaps)
    flat = coupling.reshape(*slope.shape, -1)  # (k, i, mb): sums over m and b are products
    weighted = (coupling.conj() * outside[:, None]).reshape(flat.shape)
    mixing = 2 * (weighted @ flat.transpose(0, 2, 1)).real
    bras = kets[:, 0].conj() * weights[:, None]
    bare = np.einsum("kab,kiab->ki", bras, second @ kets).real
    i, j = np.triu_indices(slope.shape[1])
    mixing[:, i, j] += bare
    off = i != j
    mixing[:, j[off], i[off]] += bare[:, off]
    return slope, mixing, split


def _splitting(velocity: ComplexArray, members: BoolArray) -> FloatArray:
    """(n, d) spread of the eigenvalues of velocity matrices (n, d, b, b) among the members."""
    n = members.sum(axis=1)[:, None]
    pairs = members[:, None, :, None] & members[:, None, None, :]
    squares = np.where(pairs, np.abs(velocity) ** 2, 0.0).sum(axis=(2, 3)) / n
    mean = np.where(members[:, None, :], np.einsum("kibb->kib", velocity).real, 0.0).sum(axis=2) / n
    return np.asarray(np.sqrt(np.maximum(squares - mean**2, 0.0)))
