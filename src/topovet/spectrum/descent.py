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
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray
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
    does not; negative curvatures are taken by their absolute value, so that saddles are left.

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
    value, slope, curve = _local_models(bloch, objective, k_frac, multiplet)
    radius, moving = np.full(len(k_frac), FIRST_RADIUS), np.arange(len(k_frac))
    n_solves = len(k_frac)
    for _ in range(max_rounds):
        step = _newton_step(slope[moving], curve[moving], radius[moving])
        length = np.abs(step).max(axis=1)
        moving, step, length = (part[length > SETTLED_STEP] for part in (moving, step, length))
        if len(moving) == 0:
            break
        trial = k_frac[moving] + step
        new = _local_models(bloch, objective, trial, multiplet)
        n_solves += len(moving)
        falls = new[0] < value[moving]
        radius[moving] = np.where(falls, np.minimum(2 * radius[moving], LARGEST_RADIUS), length / 4)
        better = moving[falls]
        k_frac[better] = trial[falls]
        value[better], slope[better], curve[better] = (part[falls] for part in new)
    return LocalMinima(k_frac, value, n_solves)


def _newton_step(slope: FloatArray, curve: FloatArray, radius: FloatArray) -> FloatArray:
    """(n, 3): downhill, of at most the radius in each component."""
    curvatures, axes = np.linalg.eigh(curve)
    along = np.einsum("kij,ki->kj", axes, slope)
    along /= np.maximum(np.abs(curvatures), LEAST_CURVATURE)
    step = -np.einsum("kij,kj->ki", axes, along)
    length = np.abs(step).max(axis=1)
    return np.asarray(step * np.minimum(1.0, radius / np.maximum(length, 1e-300))[:, None])


_Models = tuple[FloatArray, FloatArray, FloatArray]


def _local_models(
    bloch: SmoothHamiltonian, objective: Objective, k_frac: FloatArray, multiplet: float
) -> _Models:
    """f (n,), and slope (n, 3) and second derivatives (n, 3, 3) of f or f squared."""
    parts = map_threads(
        lambda part: _local_model(bloch, objective, part, multiplet),
        [k_frac[i : i + K_AT_A_TIME] for i in range(0, len(k_frac), K_AT_A_TIME)],
    )
    value, slope, curve = (np.concatenate(column) for column in zip(*parts, strict=True))
    return value, slope, curve


def _local_model(
    bloch: SmoothHamiltonian, objective: Objective, k_frac: FloatArray, multiplet: float
) -> _Models:
    energies, states = np.linalg.eigh(bloch.lower_at(k_frac))
    value = objective.of(energies)
    upper, lower = _multiplets(energies, objective.filling, multiplet)
    slope = np.zeros(k_frac.shape)
    curve = np.zeros((*k_frac.shape, k_frac.shape[1]))
    first, second = bloch.gradient(k_frac), bloch.hessian(k_frac)
    for weight, members in ((objective.upper, upper), (objective.lower, lower)):
        if weight != 0:
            mean_slope, mean_curve = _mean_derivatives(energies, states, members, first, second)
            slope += weight * mean_slope
            curve += weight * mean_curve
    if objective.squared:
        curve = 2 * (slope[:, :, None] * slope[:, None, :] + value[:, None, None] * curve)
        slope = 2 * value[:, None] * slope
    return value, slope, curve


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
) -> tuple[FloatArray, FloatArray]:
    """First (n, d) and second (n, d, d) derivatives of the mean energy of a multiplet."""
    columns = np.flatnonzero(members.any(axis=0))  # neighbours; few
    weights = members[:, columns] / members.sum(axis=1)[:, None]
    kets = states[:, None, :, columns]
    coupling = states.conj().transpose(0, 2, 1)[:, None] @ (first @ kets)  # (k, i, m, b)
    slope = np.einsum("kibb,kb->ki", coupling[:, :, columns], weights).real
    gaps = energies[:, None, columns] - energies[:, :, None]  # (k, m, b)
    # at a closing the other side is as good as degenerate: a large curvature, but a finite one
    gaps = np.where(np.abs(gaps) < LEAST_SPLITTING_EV, LEAST_SPLITTING_EV, gaps)
    outside = np.where(members[:, :, None], 0.0, weights[:, None, :] / gaps)
    mixing = (
        2 * np.einsum("kimb,kmb,kjmb->kij", coupling.conj(), outside, coupling, optimize=True).real
    )
    bare = np.einsum("kiab,kiab,kb->ki", kets.conj(), second @ kets, weights, optimize=True).real
    i, j = np.triu_indices(slope.shape[1])
    mixing[:, i, j] += bare
    off = i != j
    mixing[:, j[off], i[off]] += bare[:, off]
    return slope, mixing
