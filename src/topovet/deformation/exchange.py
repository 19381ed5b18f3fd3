"""Parity exchanges at the TRIM: every lambda at which the gap closes there, found without sampling.

At a TRIM K inversion P_K commutes with H(lambda, K) for all lambda if it does at both ends, so that
H falls into an even and an odd block, each affine in lambda. The gap g(lambda) between levels N and
N + 1 of the two blocks together changes at most at the rate

    |g(a) - g(b)| <= rate |a - b|,     rate = lambda_max(D) - lambda_min(D),   D = H_B(K) - H_A(K),

since by Weyl's inequality each level moves by between lambda_min(D) and lambda_max(D) times the
step. Where g(a) + g(b) > rate (b - a) the gap cannot close between a and b. Other ranges are halved
until they are settled or narrower than `RESOLUTION`: no crossing can slip between samples. Where
the number of odd states below the gap differs on the two sides of what is left, levels of opposite
parity have changed places.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.deformation.path import Path
from topovet.deformation.results import ParityExchange, Point, TrimLevels
from topovet.symmetry.inversion import inversion_at
from topovet.symmetry.results import InversionOperator
from topovet.symmetry.trim import trim_points

RESOLUTION = 1e-10
"""Ranges of lambda that are not halved further."""

MOST_HALVINGS = 40

ROUNDING_FACTOR = 10.0
"""Levels from LAPACK are off by a modest multiple of n eps ||H||."""

N_SHOWN = 61
"""Values of lambda at which levels are kept for display."""


@dataclass(frozen=True, slots=True, eq=False)
class Sectors:
    """Blocks of one TRIM: (n, n) at lambda = 0 and their change, for either parity.

    Attributes
    ----------
    k
        The TRIM.
    filling
        Occupied bands.
    even, odd
        (start, change) of each block.
    rate
        The gap changes by no more than this per unit of lambda, eV.
    rounding_ev
        What rounding may do to a sum of two gaps.
    """

    k: Point
    filling: int
    even: tuple[ComplexArray, ComplexArray]
    odd: tuple[ComplexArray, ComplexArray]
    rate: float
    rounding_ev: float

    def levels(self, lams: FloatArray) -> tuple[FloatArray, FloatArray]:
        """(n, n_even) and (n, n_odd) levels, ascending, eV."""
        even, odd = (_levels(block, lams) for block in (self.even, self.odd))
        return even, odd

    def at(self, lams: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Gap (n,) eV, odd states below it (n,), and middle of the gap (n,) eV."""
        even, odd = self.levels(lams)
        energies = np.concatenate([even, odd], axis=1)
        is_odd = np.arange(energies.shape[1]) >= even.shape[1]
        order = np.argsort(energies, axis=1, kind="stable")
        sorted_ = np.take_along_axis(energies, order, axis=1)
        n_minus = is_odd[order[:, : self.filling]].sum(axis=1)
        low, high = sorted_[:, self.filling - 1], sorted_[:, self.filling]
        return high - low, n_minus, (high + low) / 2


def split_by_parity(
    path: Path,
    inversion: InversionOperator,
    filling: int,
    periodic: tuple[bool, bool, bool],
) -> tuple[Sectors, ...]:
    """The blocks of every TRIM."""
    k_trim = trim_points(periodic)
    operators = inversion_at(inversion, k_trim)
    start, change = path.start.at(k_trim), path.change.at(k_trim)
    found = []
    for k, p, h, d in zip(k_trim, operators, start, change, strict=True):
        signs, states = np.linalg.eigh((p + p.conj().T) / 2)
        blocks = []
        for members in (signs > 0, signs < 0):
            v = states[:, members]
            blocks.append((v.conj().T @ h @ v, v.conj().T @ d @ v))
        moves = np.concatenate([np.linalg.eigvalsh(block[1]) for block in blocks])
        x, y, z = (float(c) for c in k)
        size = float(np.linalg.norm(h) + np.linalg.norm(d))
        rounding = ROUNDING_FACTOR * float(np.finfo(float).eps) * len(h) * size
        rate = float(np.ptp(moves)) + rounding
        found.append(Sectors((x, y, z), filling, blocks[0], blocks[1], rate, rounding))
    return tuple(found)


def find_exchanges(sectors: Sectors) -> tuple[ParityExchange, ...]:
    """All exchanges at one TRIM, by ascending lambda.

    Two exchanges nearer to each other than `RESOLUTION` count as one, or as none if they undo each
    other; levels of equal parity that touch are none.
    """
    found = []
    for lo, hi in _unsettled(sectors):
        ends = np.array([lo, hi])
        _, n_minus, middle = sectors.at(ends)
        if n_minus[0] != n_minus[1]:
            found.append(
                ParityExchange(
                    lam=float(ends.mean()),
                    k=sectors.k,
                    n_minus_before=int(n_minus[0]),
                    n_minus_after=int(n_minus[1]),
                    energy_ev=float(middle.mean()),
                )
            )
    return tuple(found)


def levels_along(sectors: Sectors) -> TrimLevels:
    """Levels of one TRIM for display."""
    lams = np.linspace(0, 1, N_SHOWN)
    even, odd = sectors.levels(lams)
    gap, _, middle = sectors.at(lams)
    edges = np.stack([middle - gap / 2, middle + gap / 2], axis=1)
    return TrimLevels(sectors.k, lams, even, odd, edges)


def _unsettled(sectors: Sectors) -> list[tuple[float, float]]:
    """Ranges, narrower than a few `RESOLUTION`, outside of which the gap stays open."""
    lo, hi = np.array([0.0]), np.array([1.0])
    for _ in range(MOST_HALVINGS):
        if len(lo) == 0 or hi[0] - lo[0] <= RESOLUTION:
            break
        middle = (lo + hi) / 2
        lo, hi = np.concatenate([lo, middle]), np.concatenate([middle, hi])
        gaps = sectors.at(np.concatenate([lo, hi]))[0]
        open_ = gaps[: len(lo)] + gaps[len(lo) :] <= sectors.rate * (hi - lo) + sectors.rounding_ev
        lo, hi = lo[open_], hi[open_]
    order = np.argsort(lo)
    merged: list[tuple[float, float]] = []
    for a, b in zip(lo[order].tolist(), hi[order].tolist(), strict=True):
        if merged and a <= merged[-1][1]:
            merged[-1] = (merged[-1][0], b)
        else:
            merged.append((a, b))
    return merged


def _levels(block: tuple[ComplexArray, ComplexArray], lams: FloatArray) -> FloatArray:
    start, change = block
    if len(start) == 0:
        return np.empty((len(lams), 0))
    return np.asarray(np.linalg.eigvalsh(start + lams[:, None, None] * change))
