"""Sharp levels of half-crystals at fixed k_par, in the window that the bulk leaves free.

The Green's function g of the outermost layer is Hermitian at a real energy in the window and has a
pole w / (E - E_s) at a surface level. The eigenvalues x of its inverse rise through 0 there, and as
x is analytic, at E + i eta the slope of x is Im x / eta: every energy of a grid says by itself
where the nearest levels are, E_s = E - eta Re x / Im x (Newton's step). A level between two
energies is a candidate where both sides see it; where they differ the interval is halved. A
candidate is believed if the step taken anew from right beside it comes back to it, which what is
left of a finite slab's levels does not, as often as it does: degenerate levels are counted singly.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from topovet.boundary.layers import LayerStack, principal_blocks
from topovet.boundary.many_energies import HalfCrystals
from topovet.spectrum.eigen import map_threads

NEGLIGIBLE_EV = 3e-3
"""Singular values of the coupling of layers that are left out. A level moves by twice as much at
most; by less than 0.3 meV in Bi2Se3, Sb and a bismuth bilayer, where it takes a few times less
work."""

ETA_SHARE = 0.02
"""Imaginary part of the energy over the step of the grid."""

HALVINGS = 3
"""Times that an interval is halved whose two ends disagree."""

FINER = 5.0
"""The last step is taken once more with so many times less of an imaginary part, by the same
eigenvalue: among bulk states Im x does not fall with it, and the two lead to different places."""

AGREED_SHARE = 0.3
"""Of an interval: its ends agree on a level if they put it no farther apart."""

BESIDE_EV = 5e-4
"""How far beside a candidate the last step is taken."""

SETTLED_EV = 3e-4
"""The last step may move a level by this much; levels nearer to each other are one, taken as often
as the last step leads to it."""


@dataclass(frozen=True, slots=True, eq=False)
class Levels:
    """Surface levels at one k_par.

    Attributes
    ----------
    upper_ev, lower_ev
        Ascending energies of the upper and of the lower half-crystal, eV, each as often as it is
        degenerate.
    doubtful
        Candidates that did not come back.
    """

    upper_ev: FloatArray
    lower_ev: FloatArray
    doubtful: int

    def of(self, side: int) -> FloatArray:
        """Those of the upper (0) or of the lower half-crystal (1)."""
        return self.upper_ev if side == 0 else self.lower_ev


def surface_levels(
    stack: LayerStack,
    k_par: FloatArray,
    low_ev: FloatArray,
    high_ev: FloatArray,
    *,
    step_ev: float = 0.03,
    sides: tuple[int, ...] = (0, 1),
) -> list[Levels]:
    """Levels of both half-crystals at each k_par between two energies.

    Parameters
    ----------
    stack
        The crystal by planes.
    k_par
        (n, 2) fractional.
    low_ev, high_ev
        (n,) ends of each search, inside the window of the bulk at that k_par; none is made where
        they are not in this order.
    step_ev
        Step of the first grid; levels are found much more precisely.
    sides
        0 for the upper half-crystal, 1 for the lower: nothing is looked for on the other.

    Notes
    -----
    One diagonalisation for each k_par and small matrices for each energy; the memory of one k_par
    is a few times 16 n_e r^2 bytes.
    """

    def solve(i: int) -> Levels:
        low, high = float(low_ev[i]), float(high_ev[i])
        if high - low < 4 * BESIDE_EV:
            return Levels(np.empty(0), np.empty(0), 0)
        inside, across = principal_blocks(stack.planes_at(k_par[i][None]))
        halves = HalfCrystals(inside[0], across[0], negligible_ev=NEGLIGIBLE_EV)
        return _Search(halves, low, high, step_ev, sides).levels()

    return map_threads(solve, list(range(len(k_par))))


class _Search:
    """The window at one k_par."""

    def __init__(
        self, halves: HalfCrystals, low: float, high: float, step: float, sides: tuple[int, ...]
    ) -> None:
        self._halves, self._sides = halves, sides
        self._grid = np.linspace(low, high, 2 + int((high - low) / step))

    def levels(self) -> Levels:
        first = np.stack([self._grid[:-1], self._grid[1:]], axis=1)
        open_ = [first if side in self._sides else first[:0] for side in (0, 1)]
        found = [np.empty(0), np.empty(0)]
        for halving in range(1 + HALVINGS):
            asked = np.unique(np.concatenate([pairs.ravel() for pairs in open_]))
            if not len(asked):
                break
            widths = np.concatenate([pairs[:, 1] - pairs[:, 0] for pairs in open_])
            guesses = self._newton(asked, ETA_SHARE * float(widths.min()))
            for side in self._sides:
                new, open_[side] = _compare(
                    asked, guesses[side], open_[side], last=halving == HALVINGS
                )
                found[side] = np.concatenate([found[side], new])
        return self._confirmed([np.sort(f) for f in found])

    def _confirmed(self, candidates: list[FloatArray]) -> Levels:
        """The candidates that the step from beside them comes back to, as often as it does."""
        for width in (4 * BESIDE_EV, BESIDE_EV):
            asked, guesses = self._beside(candidates, width)
            candidates = [_nearest(c, asked, g) for c, g in zip(candidates, guesses, strict=True)]
        asked, guesses = self._beside(candidates, BESIDE_EV)
        _, finer = self._beside(candidates, BESIDE_EV, ETA_SHARE / FINER)
        found, doubtful = [], 0
        for energies, first, second in zip(candidates, guesses, finer, strict=True):
            at = np.searchsorted(asked, energies)
            away = np.maximum(np.abs(first[at].T - energies), np.abs(second[at].T - energies)).T
            back = (away < SETTLED_EV) & self._inside(energies)[:, None]
            found.append(np.sort(first[at][back]))
            doubtful += int((~back.any(axis=1)).sum())
        return Levels(found[0], found[1], doubtful)

    def _inside(self, energies: FloatArray) -> BoolArray:
        """Whether a level lies in the window that was asked for."""
        return np.asarray((energies >= self._grid[0]) & (energies <= self._grid[-1]))

    def _beside(
        self, candidates: list[FloatArray], width: float, eta_share: float = ETA_SHARE
    ) -> tuple[FloatArray, tuple[FloatArray, FloatArray]]:
        asked = np.unique(np.concatenate(candidates))
        if not len(asked):
            return asked, (np.empty((0, 0)), np.empty((0, 0)))
        return asked, self._newton(asked - width, eta_share * width)

    def _newton(self, energies: FloatArray, eta: float) -> tuple[FloatArray, FloatArray]:
        """(n_e, r) for both sides: where each eigenvalue says that its level is."""
        functions = self._halves.end_functions(energies + np.complex128(1j * eta))
        none = np.empty((len(energies), 0))
        upper, lower = (
            _predicted(energies, g, eta) if side in self._sides else none
            for side, g in enumerate(functions)
        )
        return upper, lower


def _predicted(energies: FloatArray, g: ComplexArray, eta: float) -> FloatArray:
    # of the inverse, eigenvalues next to a level are the small ones: others do not mix with them
    inverse = np.linalg.inv(g)
    adjoint = inverse.conj().transpose(0, 2, 1)
    x, vectors = np.linalg.eigh(0.5 * (inverse + adjoint))
    anti = 0.5j * (adjoint - inverse)
    slope = np.einsum("emj,emj->ej", vectors.conj(), anti @ vectors).real / eta
    return np.asarray(energies[:, None] - x / np.maximum(slope, np.finfo(float).tiny))


def _compare(
    asked: FloatArray, guesses: FloatArray, pairs: FloatArray, *, last: bool
) -> tuple[FloatArray, FloatArray]:
    """Levels of the intervals whose two ends agree, and the halves of the other intervals.

    Where x has a pole, which is no level, one end sees one that the other does not: when nothing
    more is halved, all that either end sees is followed.
    """
    ends: IntArray = np.searchsorted(asked, pairs)
    found, halves = [], []
    for (low, high), at in zip(pairs, ends, strict=True):
        left, right = (np.sort(g[(g >= low) & (g < high)]) for g in guesses[at])
        if len(left) == len(right) and np.all(np.abs(left - right) < AGREED_SHARE * (high - low)):
            share = (left - low) / (high - low)
            found.append(left * (1 - share) + right * share)  # the nearer end sees a level better
        elif last:
            found.append(left if len(left) >= len(right) else right)
        else:
            middle = (low + high) / 2
            halves += [(low, middle), (middle, high)]
    return (np.concatenate(found) if found else np.empty(0)), np.reshape(halves, (-1, 2))


def _nearest(candidates: FloatArray, asked: FloatArray, guesses: FloatArray) -> FloatArray:
    """Where the step from beside each candidate leads; candidates that meet become one."""
    moved = []
    for energy in candidates:
        of_it = guesses[np.searchsorted(asked, energy)]
        moved.append(float(of_it[np.abs(of_it - energy).argmin()]))
    kept: list[float] = []
    for energy in sorted(moved):
        if not kept or energy - kept[-1] > SETTLED_EV:
            kept.append(energy)
    return np.array(kept)
