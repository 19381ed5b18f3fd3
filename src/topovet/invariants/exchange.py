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
short, all of them or those before the first meeting; what is settled is proved to be free of one,
rounding included. Levels of one parity may touch as they like. Where time reversal makes Kramers
pairs a level is a pair, at the mean of its two energies, which the same bounds hold for.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray

RESOLUTION, FINE_RESOLUTION = 1e-6, 1e-10
"""Lengths of the intervals (in t) that a first exchange, and each of all of them, is enclosed in.
"""

FIRST_STEPS = 8
"""Equal intervals that the range is first cut into."""

MOST_SOLVES = 4000
"""Values of t at one TRIM; only levels of opposite parity that stay together need so many."""

ROUNDING_FACTOR = 10.0
"""Levels from LAPACK are off by a modest multiple of n eps ||H||."""


@dataclass(frozen=True, slots=True, eq=False)
class ParityBlocks:
    """H and V at one TRIM in the even and in the odd states.

    Attributes
    ----------
    h, v
        Even block, then odd block, eV; any size, also 0.
    kramers
        Whether levels come in pairs and are counted as such.
    """

    h: tuple[ComplexArray, ComplexArray]
    v: tuple[ComplexArray, ComplexArray]
    kramers: bool = True

    @property
    def closing_rate(self) -> float:
        """L: how fast levels of opposite parity can approach each other."""
        spectra = [np.linalg.eigvalsh(v) if len(v) else np.zeros(1) for v in self.v]
        even, odd = spectra
        return float(max(even[-1] - odd[0], odd[-1] - even[0], 0.0))

    def levels(self, t: FloatArray) -> tuple[FloatArray, FloatArray]:
        """(n_t, n_even) and (n_t, n_odd) levels, ascending, eV."""
        even, odd = (
            _energies(h + t[:, None, None] * v, 2 if self.kramers else 1)
            for h, v in zip(self.h, self.v, strict=True)
        )
        return even, odd

    def rounding_ev(self, reach: float) -> float:
        """What rounding may do to a sum of two distances of levels for |t| up to `reach`."""
        size = sum(float(np.linalg.norm(h)) for h in self.h)
        size += abs(reach) * sum(float(np.linalg.norm(v)) for v in self.v)
        return ROUNDING_FACTOR * float(np.finfo(float).eps) * sum(map(len, self.h)) * size


@dataclass(frozen=True, slots=True)
class FirstExchange:
    """The first exchange at a TRIM between t = 0 and the end of the range.

    Attributes
    ----------
    at
        t of the exchange, the middle of the interval that encloses it; None without one.
    n_odd, n_odd_after
        Odd filled levels at t = 0 and beyond the exchange (as before without one).
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


@dataclass(frozen=True, slots=True)
class Exchange:
    """One change of the number of odd filled levels between t = `low` and t = `high`."""

    low: float
    high: float
    n_odd: int
    n_odd_after: int


def parity_blocks(
    h: ComplexArray, v: ComplexArray, inversion: ComplexArray, *, kramers: bool = True
) -> ParityBlocks:
    """Blocks of H and V, each averaged over inversion first.

    Parameters
    ----------
    h, v
        (n_orb, n_orb) at a TRIM, eV.
    inversion
        (n_orb, n_orb) D(K), unitary with D^2 = 1.
    kramers
        Whether levels come in pairs.
    """
    values, states = np.linalg.eigh(0.5 * (inversion + inversion.conj().T))
    sectors = [states[:, values > 0], states[:, values < 0]]  # a block leaves nothing to average
    even_h, odd_h = (s.conj().T @ h @ s for s in sectors)
    even_v, odd_v = (s.conj().T @ v @ s for s in sectors)
    return ParityBlocks((even_h, odd_h), (even_v, odd_v), kramers)


def first_exchange(blocks: ParityBlocks, filled: int, reach: float) -> FirstExchange:
    """The first exchange on the way from t = 0 to t = reach (of either sign).

    Parameters
    ----------
    blocks
        At one TRIM.
    filled
        Filled levels (pairs, where levels are pairs), at least one, and at least one empty.
    reach
        End of the range; 0 is not allowed.
    """
    t, n_odd, settled = _halved(blocks, filled, reach, RESOLUTION, first_only=True)
    return _concluded(t, n_odd, settled | (np.abs(np.diff(t)) <= RESOLUTION))


def all_exchanges(blocks: ParityBlocks, filled: int) -> tuple[Exchange, ...]:
    """All exchanges from t = 0 to t = 1, ascending.

    Two that are nearer to each other than `FINE_RESOLUTION` count as one, or as none if they undo
    each other. So do those within a range, of any length, in which levels of opposite parity stay
    too near to each other to be told apart.

    Parameters
    ----------
    blocks, filled
        As above.
    """
    t, n_odd, settled = _halved(blocks, filled, 1.0, FINE_RESOLUTION, first_only=False)
    edges = np.diff(np.concatenate([[False], ~settled, [False]]).astype(int))
    ranges = zip(
        np.flatnonzero(edges > 0).tolist(), np.flatnonzero(edges < 0).tolist(), strict=True
    )
    return tuple(
        Exchange(float(t[i]), float(t[j]), int(n_odd[i]), int(n_odd[j]))
        for i, j in ranges
        if n_odd[i] != n_odd[j]
    )


def _halved(
    blocks: ParityBlocks, filled: int, reach: float, resolution: float, *, first_only: bool
) -> tuple[FloatArray, IntArray, BoolArray]:
    """Values t (n,) with the odd filled levels there (n,), and which steps are settled (n - 1,)."""
    rounding = blocks.rounding_ev(reach)
    rate = max(blocks.closing_rate, np.finfo(float).tiny)
    t = np.linspace(0.0, reach, FIRST_STEPS + 1)
    n_odd, room = _room(blocks, filled, t)
    while True:
        width = np.abs(np.diff(t))
        same = n_odd[1:] == n_odd[:-1]
        settled = same & (room[1:] + room[:-1] > rate * width + rounding)
        split = ~settled & (width > resolution)
        if first_only:  # what lies beyond the first change is of no interest
            split[_first(~same) + 1 :] = False
        if not split.any() or len(t) + int(split.sum()) > MOST_SOLVES:
            return t, n_odd, settled
        where = np.flatnonzero(split) + 1
        middle = 0.5 * (t[where] + t[where - 1])
        new_odd, new_room = _room(blocks, filled, middle)
        t = np.insert(t, where, middle)
        n_odd = np.insert(n_odd, where, new_odd)
        room = np.insert(room, where, new_room)


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


def _room(blocks: ParityBlocks, filled: int, t: FloatArray) -> tuple[IntArray, FloatArray]:
    """Odd filled levels (n_t,), and the room (n_t,) before one of them is exchanged, eV."""
    even, odd = blocks.levels(t)
    is_odd = np.repeat([False, True], [even.shape[1], odd.shape[1]])
    order = np.argsort(np.concatenate([even, odd], axis=1), axis=1, kind="stable")[:, :filled]
    n_odd = is_odd[order].sum(axis=1)
    even, odd = _fenced(even), _fenced(odd)  # position n is the top of n filled states
    row, n_even = np.arange(len(t)), filled - n_odd
    to_odd = odd[row, n_odd + 1] - even[row, n_even]
    to_even = even[row, n_even + 1] - odd[row, n_odd]
    return n_odd.astype(np.int64), np.minimum(to_odd, to_even)


def _energies(h: ComplexArray, multiplicity: int) -> FloatArray:
    """(n_t, n / multiplicity) levels of (n_t, n, n), ascending, so many states to each."""
    if not h.shape[1]:
        return np.empty((len(h), 0))
    return np.asarray(np.linalg.eigvalsh(h).reshape(len(h), -1, multiplicity).mean(axis=2))


def _fenced(levels: FloatArray) -> FloatArray:
    return np.pad(levels, ((0, 0), (1, 1)), constant_values=((0, 0), (-np.inf, np.inf)))
