"""What a tampered Hamiltonian really is: an oracle of its own, plain and slow.

Nothing here is shared with the package but the list of H(R). Where a fault changes the physics the
verdict is compared with this: time reversal on the H(R) themselves, the smallest gap by a mesh and
simplex descent, Z2 by hybrid Wannier charge centres with the largest gap followed (Soluyanov,
Vanderbilt, PRB 83, 235401 (2011), doi:10.1103/PhysRevB.83.235401), lines added and
points doubled until nothing changes and, in 3D, only where three determinations of nu_0 agree.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
from scipy.optimize import minimize
from threadpoolctl import threadpool_limits

from topovet.arrays import ComplexArray, FloatArray, IntArray

TIME_REVERSAL_MEV = 1.0
"""A Hamiltonian that breaks time reversal by less is judged by its symmetric average: the package
says that it does so up to this."""

CLOSED_MEV = 0.01
"""Smallest gaps below this, reached by descent, are closings."""

FIRST_STEPS = 10
"""Intervals of half of the zone that a plane starts from; each is halved where it must be."""

POINTS = (12, 24, 48, 96)
"""Points that each loop starts from in successive attempts; two of them must agree."""

LEAST_OVERLAP = 0.7
"""Smallest singular value of the overlap of the occupied spaces of neighbouring k along a loop:
below it the space may have turned over unseen."""

LEAST_OVERLAP_OF_LINES = 0.9
"""The same from loop to loop, where a charge centre must not jump over the gap that is followed."""

CLEARANCE = 0.25
"""Nearest that a charge centre of the next line may come to the middle of the followed gap, as a
share of the gap's half-width: nearer, and it might have passed unseen."""

FINEST_STEP = 2.0**-14

I_SIGMA_Y = np.array([[0.0, 1.0], [-1.0, 0.0]])


class NotSettledError(Exception):
    """The refinement ended before it was certain: the test case is too close to a transition."""


@dataclass(frozen=True, slots=True, eq=False)
class Lattice:
    """H(R) as the oracle takes it: weights applied, spinors interlaced.

    Attributes
    ----------
    r_cells, h_r
        (n_r, 3) integers and (n_r, n_orb, n_orb) eV.
    periodic
        Periodic directions.
    """

    r_cells: IntArray
    h_r: ComplexArray
    periodic: tuple[bool, bool, bool]

    def at(self, k_frac: FloatArray) -> ComplexArray:
        """H(k), (n_k, n_orb, n_orb), for (n_k, 3)."""
        phases = np.exp(2j * np.pi * np.asarray(k_frac) @ self.r_cells.T)
        n = self.h_r.shape[1]
        return np.asarray((phases @ self.h_r.reshape(len(self.h_r), -1)).reshape(-1, n, n))


def true_z2(lattice: Lattice, filling: int) -> tuple[int, ...] | None:
    """(nu0; nu1 nu2 nu3), (nu,) in 2D, or None where no Z2 index exists.

    None: an odd filling, time reversal broken by more than `TIME_REVERSAL_MEV`, or a gap that
    closes somewhere.
    """
    with threadpool_limits(1):  # matrices of tens of rows: threads would only wait for each other
        return _true_z2(lattice, filling)


def _true_z2(lattice: Lattice, filling: int) -> tuple[int, ...] | None:
    h_r = lattice.h_r
    if filling % 2 or h_r.shape[1] % 2:
        return None
    u = np.kron(np.eye(h_r.shape[1] // 2), I_SIGMA_Y)
    reversed_h = u @ h_r.conj() @ u.T
    # the sum over R bounds the violation at every k
    difference = np.linalg.norm(reversed_h - h_r, ord=2, axis=(1, 2))
    if 1000 * _largest_violation(lattice, reversed_h - h_r, difference) > TIME_REVERSAL_MEV:
        return None
    even = Lattice(lattice.r_cells, 0.5 * (h_r + reversed_h), lattice.periodic)
    if 1000 * smallest_gap_ev(even, filling) < CLOSED_MEV:
        return None
    return _settled_indices(even, filling)


def _largest_violation(lattice: Lattice, odd: ComplexArray, norms: FloatArray) -> float:
    """Largest spectral norm of the odd part over a small mesh, eV; the sum if that is tiny."""
    if norms.sum() < 1e-3 * TIME_REVERSAL_MEV:
        return float(norms.sum())
    mesh = np.array(list(itertools.product(*(_ticks(p, 6, 0.0) for p in lattice.periodic))))
    h_odd = Lattice(lattice.r_cells, odd, lattice.periodic).at(mesh)
    return float(np.linalg.norm(h_odd, ord=2, axis=(1, 2)).max())


def smallest_gap_ev(lattice: Lattice, filling: int, points: int = 12, starts: int = 8) -> float:
    """Smallest direct gap met by a shifted mesh and simplex descents from its lowest points."""
    if lattice.h_r.shape[1] > 12:
        points = 8
    axes = [_ticks(p, points, 0.5) for p in lattice.periodic]
    mesh = np.concatenate(
        [
            np.array(list(itertools.product(*axes))),
            np.array(list(itertools.product(*(_ticks(p, 2, 0.0) for p in lattice.periodic)))),
        ]
    )
    gaps = _gaps(lattice, filling, mesh)
    free = np.flatnonzero(lattice.periodic)
    best = float(gaps.min())

    def objective(x: FloatArray) -> float:
        k = np.zeros((1, 3))
        k[0, free] = x
        return float(_gaps(lattice, filling, k)[0])

    for start in mesh[np.argsort(gaps, kind="stable")[:starts]]:
        simplex = start[free] + 0.5 / points * np.vstack([np.zeros(len(free)), np.eye(len(free))])
        found = minimize(
            objective,
            start[free],
            method="Nelder-Mead",
            options={"initial_simplex": simplex, "xatol": 1e-7, "fatol": 1e-9, "maxiter": 400},
        )
        best = min(best, float(found.fun))
        if best < 1e-3 * CLOSED_MEV:
            break
    return best


def _ticks(periodic: bool, points: int, offset: float) -> list[float]:
    return [(i + offset) / points for i in range(points)] if periodic else [0.0]


def _gaps(lattice: Lattice, filling: int, k_frac: FloatArray) -> FloatArray:
    energies = np.linalg.eigvalsh(lattice.at(k_frac))
    return np.asarray(energies[:, filling] - energies[:, filling - 1])


def _settled_indices(lattice: Lattice, filling: int) -> tuple[int, ...]:
    """Indices from all planes, the more points the less they agree."""
    for first in range(len(POINTS) - 1):
        found = _indices(lattice, filling, POINTS[first:])
        if found is not None:
            return found
    raise NotSettledError("nu_0 is not one number")


def _indices(lattice: Lattice, filling: int, points: tuple[int, ...]) -> tuple[int, ...] | None:
    """Indices, or None where the three determinations of nu_0 differ."""
    if not all(lattice.periodic):
        normal = int(np.argmin(lattice.periodic))
        return (_plane_z2(lattice, filling, (normal, 0.0), points),)
    at_zero, at_half = (
        [_plane_z2(lattice, filling, (axis, value), points) for axis in range(3)]
        for value in (0.0, 0.5)
    )
    strong = {(a + b) % 2 for a, b in zip(at_zero, at_half, strict=True)}
    return (strong.pop(), *at_half) if len(strong) == 1 else None


def _plane_z2(
    lattice: Lattice, filling: int, plane: tuple[int, float], points: tuple[int, ...]
) -> int:
    """Z2 of the plane k_normal = value, the same with two numbers of points in a row."""
    before = None
    for n in points:
        found = _flow(lattice, filling, plane, n)
        if found is not None and found == before:
            return found
        before = found
    raise NotSettledError(f"plane k{plane[0] + 1} = {plane[1]}: last {before}")


def _flow(lattice: Lattice, filling: int, plane: tuple[int, float], points: int) -> int | None:
    """Charge centres that the largest gap jumps over on the way from 0 to 1/2, modulo 2.

    An interval is halved until the gap of either end is clear of the centres of the other; None
    where that never comes to an end.
    """
    lines: dict[float, _Line | None] = {}

    def line(t: float) -> _Line | None:
        if t not in lines:
            lines[t] = _follow(lattice, filling, _loop(plane, t, points))
        return lines[t]

    jumped = 0
    to_do = [(i / (2 * FIRST_STEPS), (i + 1) / (2 * FIRST_STEPS)) for i in range(FIRST_STEPS)]
    while to_do:
        start, end = to_do.pop()
        one, other = line(start), line(end)
        if one is None or other is None:
            return None
        if _are_neighbours(one, other):
            low, high = sorted((_gap_of(one.centres)[0], _gap_of(other.centres)[0]))
            jumped += int(((other.centres > low) & (other.centres < high)).sum())
        elif end - start < FINEST_STEP:
            return None
        else:
            middle = (start + end) / 2
            to_do += [(start, middle), (middle, end)]
    return jumped % 2


@dataclass(frozen=True, slots=True, eq=False)
class _Line:
    """Charge centres of one loop, sorted in [0, 1), and the states at its first points."""

    centres: FloatArray
    occupied: ComplexArray


def _are_neighbours(one: _Line, other: _Line) -> bool:
    """Whether the gap of either is clear of the other's centres, and their states are alike."""
    if not (_is_clear(one.centres, other.centres) and _is_clear(other.centres, one.centres)):
        return False
    overlaps = one.occupied.conj().transpose(0, 2, 1) @ other.occupied
    return bool(np.linalg.svd(overlaps, compute_uv=False).min() > LEAST_OVERLAP_OF_LINES)


def _loop(plane: tuple[int, float], t: float, points: int) -> FloatArray:
    normal, value = plane
    along, pump = (axis for axis in range(3) if axis != normal)
    k = np.zeros((points, 3))
    k[:, normal], k[:, pump], k[:, along] = value, t, np.arange(points) / points
    return k


def _is_clear(centres: FloatArray, others: FloatArray) -> bool:
    middle, half_width = _gap_of(centres)
    distance = np.abs((others - middle + 0.5) % 1.0 - 0.5)
    return bool(distance.min() > CLEARANCE * half_width)


def _follow(lattice: Lattice, filling: int, k_loop: FloatArray) -> _Line | None:
    """Hybrid Wannier charge centres of a closed loop; points are put in where the states turn.

    None where no number of points makes the states of neighbours alike.
    """
    base = _occupied(lattice, filling, k_loop)
    k, states = k_loop, base
    step = np.roll(k_loop, -1, axis=0) - k_loop
    step[-1] -= np.round(step[-1])  # H(k + G) = H(k): the loop closes on itself
    while True:
        following = np.roll(states, -1, axis=0)
        left, overlap, right = np.linalg.svd(states.conj().transpose(0, 2, 1) @ following)
        far = np.flatnonzero(overlap.min(axis=1) < LEAST_OVERLAP)
        if not len(far):
            break
        if np.abs(step[far]).max() < FINEST_STEP:
            return None
        middle = k[far] + step[far] / 2
        step[far] /= 2
        k = np.insert(k, far + 1, middle, axis=0)
        states = np.insert(states, far + 1, _occupied(lattice, filling, middle), axis=0)
        step = np.insert(step, far + 1, step[far], axis=0)
    loop = np.eye(filling, dtype=complex)
    for link in left @ right:
        loop = loop @ link
    centres = np.sort(np.angle(np.linalg.eigvals(loop)) / (2 * np.pi) % 1.0)
    return _Line(centres, base)


def _occupied(lattice: Lattice, filling: int, k_frac: FloatArray) -> ComplexArray:
    return np.asarray(np.linalg.eigh(lattice.at(k_frac))[1][:, :, :filling])


def _gap_of(centres: FloatArray) -> tuple[float, float]:
    """Middle and half-width of the largest gap between charge centres."""
    widths = np.diff(np.append(centres, centres[0] + 1.0))
    widest = int(widths.argmax())
    half = float(widths[widest]) / 2
    return float((centres[widest] + half) % 1.0), half
