"""Where filled and empty states of opposite parity change places at a TRIM along H + t V.

Inversion splits H and V at a TRIM into an even and an odd block. By Weyl's inequality a level of a
block moves between t and t + dt by at least dt times the smallest and at most dt times the largest
eigenvalue of its block of V. Two levels of opposite parity therefore approach each other at a rate
of at most

    L = max(max V+ - min V-, max V- - min V+)            (1 where V is a projector on orbitals).

Let room(t) >= 0 be the distance over which a filled and an empty state of opposite parity would
have to move to meet. Where the number of odd filled states is the same at a and b and

    room(a) + room(b) > L (b - a),

they cannot have met in between: this interval is settled. All others are halved until they are
short. What is found is the first meeting, and what lies before it is proved to be free of one, up
to the rounding of LAPACK. Levels are Kramers pairs, each at the mean of its two energies, which the
same bounds hold for.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray

RESOLUTION = 1e-6
"""Length of the interval (in t) that a first exchange is enclosed in."""

FIRST_STEPS = 8
"""Equal intervals that the range is first cut into."""

MOST_SOLVES = 4000
"""Values of t at one TRIM; only levels of opposite parity that stay together need so many."""


@dataclass(frozen=True, slots=True, eq=False)
class ParityBlocks:
    """H and V at one TRIM in the even and in the odd states.

    Attributes
    ----------
    h, v
        Even block, then odd block, eV; any size, also 0.
    """

    h: tuple[ComplexArray, ComplexArray]
    v: tuple[ComplexArray, ComplexArray]

    @property
    def closing_rate(self) -> float:
        """L: how fast levels of opposite parity can approach each other."""
        spectra = [np.linalg.eigvalsh(v) if len(v) else np.zeros(1) for v in self.v]
        even, odd = spectra
        return float(max(even[-1] - odd[0], odd[-1] - even[0], 0.0))


@dataclass(frozen=True, slots=True)
class FirstExchange:
    """The first exchange at a TRIM between t = 0 and the end of the range.

    Attributes
    ----------
    at
        t of the exchange, the middle of the interval that encloses it; None without one.
    n_odd, n_odd_after
        Odd filled pairs at t = 0 and beyond the exchange (as before without one).
    free_up_to
        No exchange between 0 and this t. Below both `at` and the end of the range only where
        levels of opposite parity stay too near to each other to be told apart.
    n_solves
        Eigenvalue problems, two blocks each.
    """

    at: float | None
    n_odd: int
    n_odd_after: int
    free_up_to: float
    n_solves: int


def parity_blocks(h: ComplexArray, v: ComplexArray, inversion: ComplexArray) -> ParityBlocks:
    """Blocks of H and V, each averaged over inversion first.

    Parameters
    ----------
    h, v
        (n_orb, n_orb) at a TRIM, eV.
    inversion
        (n_orb, n_orb) D(K), unitary with D^2 = 1.
    """
    values, states = np.linalg.eigh(0.5 * (inversion + inversion.conj().T))
    sectors = [states[:, values > 0], states[:, values < 0]]  # a block leaves nothing to average
    even_h, odd_h = (s.conj().T @ h @ s for s in sectors)
    even_v, odd_v = (s.conj().T @ v @ s for s in sectors)
    return ParityBlocks((even_h, odd_h), (even_v, odd_v))


def first_exchange(blocks: ParityBlocks, filled_pairs: int, reach: float) -> FirstExchange:
    """The first exchange on the way from t = 0 to t = reach (of either sign).

    Parameters
    ----------
    blocks
        At one TRIM.
    filled_pairs
        Filled Kramers pairs, at least one, and at least one empty.
    reach
        End of the range; 0 is not allowed.
    """
    rate = max(blocks.closing_rate, np.finfo(float).tiny)
    t = np.linspace(0.0, reach, FIRST_STEPS + 1)
    n_odd, room = _levels(blocks, filled_pairs, t)
    while True:
        width = np.abs(np.diff(t))
        same = n_odd[1:] == n_odd[:-1]
        settled = same & (room[1:] + room[:-1] > rate * width)
        last = _first(~same)  # what lies beyond the first change is of no interest
        split = ~settled & (width > RESOLUTION)
        split[last + 1 :] = False
        if not split.any() or len(t) + int(split.sum()) > MOST_SOLVES:
            break
        where = np.flatnonzero(split) + 1
        middle = 0.5 * (t[where] + t[where - 1])
        new_odd, new_room = _levels(blocks, filled_pairs, middle)
        t = np.insert(t, where, middle)
        n_odd = np.insert(n_odd, where, new_odd)
        room = np.insert(room, where, new_room)
    return _concluded(t, n_odd, settled | (width <= RESOLUTION))


def _concluded(t: FloatArray, n_odd: IntArray, settled: BoolArray) -> FirstExchange:
    change = _first(n_odd[1:] != n_odd[:-1])
    open_at = _first(~settled)  # the change itself is enclosed, unless the budget ended first
    before = int(n_odd[0])
    if open_at < min(change + 1, len(settled)):
        return FirstExchange(None, before, before, float(t[open_at]), len(t))
    if change == len(settled):
        return FirstExchange(None, before, before, float(t[-1]), len(t))
    at = float(0.5 * (t[change] + t[change + 1]))
    return FirstExchange(at, before, int(n_odd[change + 1]), float(t[change]), len(t))


def _first(mask: BoolArray) -> int:
    """Position of the first True, the length of the mask without one."""
    return int(mask.argmax()) if mask.any() else len(mask)


def _levels(blocks: ParityBlocks, filled_pairs: int, t: FloatArray) -> tuple[IntArray, FloatArray]:
    """Odd filled pairs (n_t,), and the room (n_t,) before one of them is exchanged, eV."""
    even, odd = (_pairs(h + t[:, None, None] * v) for h, v in zip(blocks.h, blocks.v, strict=True))
    is_odd = np.repeat([False, True], [even.shape[1], odd.shape[1]])
    order = np.argsort(np.concatenate([even, odd], axis=1), axis=1, kind="stable")[:, :filled_pairs]
    n_odd = is_odd[order].sum(axis=1)
    even, odd = _fenced(even), _fenced(odd)  # position n is the top of n filled states
    row, n_even = np.arange(len(t)), filled_pairs - n_odd
    to_odd = odd[row, n_odd + 1] - even[row, n_even]
    to_even = even[row, n_even + 1] - odd[row, n_odd]
    return n_odd.astype(np.int64), np.minimum(to_odd, to_even)


def _pairs(h: ComplexArray) -> FloatArray:
    """(n_t, n / 2) energies of Kramers pairs of (n_t, n, n), ascending."""
    if not h.shape[1]:
        return np.empty((len(h), 0))
    return np.asarray(np.linalg.eigvalsh(h).reshape(len(h), -1, 2).mean(axis=2))


def _fenced(levels: FloatArray) -> FloatArray:
    return np.pad(levels, ((0, 0), (1, 1)), constant_values=((0, 0), (-np.inf, np.inf)))
