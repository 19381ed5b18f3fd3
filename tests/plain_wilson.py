"""Wilson loops as one would write them first: one k at a time, an SVD for each link, a fixed mesh.

The slow twin of `topovet.invariants.wilson_loop` and its relatives: it shares no code with them,
puts points evenly, compares nothing and never says "unresolved". On a fine mesh it is right.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from topovet.arrays import ComplexArray, FloatArray

Hamiltonian = Callable[[FloatArray], ComplexArray]


def plain_hwcc(
    hamiltonian: Hamiltonian, start: FloatArray, g: FloatArray, n_points: int, n_occ: int
) -> FloatArray:
    """Hybrid Wannier centres (n_occ,), ascending in [0, 1), on the line start, …, start + g."""
    states = []
    for i in range(n_points):
        _, vectors = np.linalg.eigh(hamiltonian(start + i / n_points * g))
        states.append(vectors[:, :n_occ])
    loop = np.eye(n_occ, dtype=complex)
    for i in range(n_points):
        w, _, v = np.linalg.svd(states[i].conj().T @ states[(i + 1) % n_points])
        loop = loop @ w @ v
    return np.sort((-np.angle(np.linalg.eigvals(loop)) / (2 * np.pi)) % 1.0)


def plain_plane_z2(
    hamiltonian: Hamiltonian,
    axes: tuple[int, int],
    origin: Sequence[float],
    n_occ: int,
    *,
    n_lines: int,
    n_points: int,
) -> int:
    """Z2 of half a plane by the largest-gap rule on evenly spaced lines.

    Parameters
    ----------
    hamiltonian
        k (3,) to H(k).
    axes
        Directions across and along which the plane extends.
    origin
        k of its corner.
    """
    across, along = np.eye(3)[list(axes)]
    lines = [
        plain_hwcc(hamiltonian, np.array(origin) + x * across, along, n_points, n_occ)
        for x in np.linspace(0, 0.5, n_lines)
    ]
    middles = [_middle_of_largest_gap(centres) for centres in lines]
    jumps = 0
    for i in range(n_lines - 1):
        low, high = sorted((middles[i], middles[i + 1]))
        jumps += sum(bool(low < x < high) for x in lines[i + 1])
    return jumps % 2


def _middle_of_largest_gap(centres: FloatArray) -> float:
    best, middle = 0.0, 0.0
    for i, x in enumerate(centres):
        following = centres[i + 1] if i + 1 < len(centres) else centres[0] + 1
        if following - x > best:
            best, middle = following - x, (x + following) / 2 % 1
    return middle
