"""How hybrid Wannier charge centres move from line to line, and what that counts.

Centres live on a circle of length 1. Two independent rules give Z2 of half a plane between two
lines that time reversal maps to themselves:

- *largest gap*: follow the middle z of the largest gap between centres and add up how many centres
  lie between z and its next value on the next line (Soluyanov and Vanderbilt, Phys. Rev. B 83,
  235401 (2011), doi:10.1103/PhysRevB.83.235401);
- *reference line*: add up how often centres cross a fixed value (Yu, Qi, Bernevig, Fang, Dai, Phys.
  Rev. B 84, 075119 (2011), doi:10.1103/PhysRevB.84.075119).

The first looks at the centres of each line alone. The second needs to know which centre goes where;
two sets on a circle can be matched in many ways, a turn of all centres by one place apart, and the
closest match may be the wrong one: where a centre darts across a gap between two lines, all others
can move up a little instead. What tells them apart is the sum of all steps: it is the Berry flux
through the strip between the lines over 2 pi, which is known from the states (`wilson_strip`).
"""

from __future__ import annotations

import numpy as np

from topovet.arrays import FloatArray, IntArray


def largest_gaps(hwcc: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Middle in [0, 1) and width of the largest gap of each set (n_lines, n_occ), ascending."""
    hwcc = np.asarray(hwcc)
    gaps = np.diff(hwcc, axis=1, append=hwcc[:, :1] + 1.0)
    rows, widest = np.arange(len(hwcc)), gaps.argmax(axis=1)
    width = gaps[rows, widest]
    return (hwcc[rows, widest] + width / 2) % 1.0, width


def closest_steps(first: FloatArray, second: FloatArray) -> FloatArray:
    """Steps (n, n_occ) that take first sets to second ones with the smallest largest step.

    On a circle an assignment that keeps the cyclic order is among the best, so only the turns of
    one sorted set against the other are compared.

    Parameters
    ----------
    first, second
        (n, n_occ) in [0, 1), ascending.
    """
    n_occ = first.shape[1]
    turns = np.arange(-n_occ, n_occ + 1)
    steps = _turned(second, turns[None, :]) - first[:, None, :]
    best = np.abs(steps).max(axis=2).argmin(axis=1)
    return np.asarray(steps[np.arange(len(first)), best])


def steps_of_flux(first: FloatArray, second: FloatArray, flux_turns: FloatArray) -> FloatArray:
    """Steps (n, n_occ) in cyclic order whose sum is the flux through the strip between.

    Parameters
    ----------
    first, second
        (n, n_occ) in [0, 1), ascending.
    flux_turns
        (n,) Berry flux over 2 pi; up to an integer it is the difference of the sums of centres.
    """
    turns = np.round(flux_turns - second.sum(axis=1) + first.sum(axis=1)).astype(np.int64)
    return np.asarray(_turned(second, turns[:, None])[:, 0] - first)


def _turned(hwcc: FloatArray, turns: IntArray) -> FloatArray:
    """Centres counted on from place `turns` (n or 1, m) around the circle, (n, m, n_occ)."""
    n_occ = hwcc.shape[1]
    target = np.arange(n_occ) + turns[:, :, None]
    rows = np.arange(len(hwcc))[:, None, None]
    return np.asarray(hwcc[rows, target % n_occ] + target // n_occ)


def largest_gap_parity(hwcc: FloatArray) -> int:
    """Centres that the middle of the largest gap jumps over along the lines, modulo 2.

    The middles z and z' cut the circle into two arcs; which of them is meant does not matter, since
    the number of centres is even.

    Parameters
    ----------
    hwcc
        (n_lines, n_occ), n_occ even.
    """
    middle, _ = largest_gaps(hwcc)
    low = np.minimum(middle[:-1], middle[1:])[:, None]
    high = np.maximum(middle[:-1], middle[1:])[:, None]
    return int(((low < hwcc[1:]) & (hwcc[1:] < high)).sum()) % 2


def crossings(first: FloatArray, steps: FloatArray, references: FloatArray) -> IntArray:
    """How often centres that take the given steps cross each reference value, (n_references,).

    A crossing up and one down count as two.

    Parameters
    ----------
    first, steps
        (n, n_occ) where the centres start and how far they go, for each pair of lines.
    references
        (n_references,) in [0, 1).
    """
    before = np.floor(first[None] - references[:, None, None])
    after = np.floor((first + steps)[None] - references[:, None, None])
    return np.asarray(np.abs(after - before).sum(axis=(1, 2)), dtype=np.int64)


def kramers_splitting(hwcc: FloatArray) -> float:
    """Largest distance within the Kramers pairs of one set (n_occ,), 0 where states pair exactly.

    Pairs may straddle 0, so both pairings of neighbours are tried.
    """
    pairs = np.diff(hwcc)[::2]
    across_zero = np.append(np.diff(hwcc)[1::2], hwcc[0] + 1.0 - hwcc[-1])
    return float(min(pairs.max(), across_zero.max()))


def distance_to_set(values: FloatArray, hwcc: FloatArray) -> FloatArray:
    """Distance on the circle of each value (n,) to the nearest member of a set (n_occ,)."""
    apart = np.abs(values[:, None] - hwcc[None, :]) % 1.0
    return np.asarray(np.minimum(apart, 1.0 - apart).min(axis=1))
