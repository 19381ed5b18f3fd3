"""How often a space-group operation crosses layers of a crystal, modulo 2.

A crystal put together from layers that are two-dimensional topological insulators is told apart by
the number of layers n(x, gx) on the way from a general point x to its image under each operation g.
Layers are closed sheets, and the group maps them to each other, so that this number modulo 2
depends on neither x nor the way, and

    delta(g h) = n(x, gx) + n(gx, ghx) = delta(g) + delta(h)   (modulo 2):

delta is a homomorphism of the space group onto numbers modulo 2. For a lattice translation it is
the weak index. All of them are the solutions of linear equations over GF(2).

References
----------
Song, Zhang, Fang, Fang, Nat. Commun. 9, 3530 (2018), doi:10.1038/s41467-018-06010-w (layer
constructions); Khalaf, Po, Vishwanath, Watanabe, Phys. Rev. X 8, 031070 (2018),
doi:10.1103/PhysRevX.8.031070 (the same signs from surface mass terms).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.symmetry.operations import multiplication_table

MOST_FREE = 14
"""More free parities than any space group in a primitive cell has; their choices are listed."""


@dataclass(frozen=True, slots=True, eq=False)
class LayerParities:
    """Choices of delta.

    Attributes
    ----------
    choices
        (n_choice, n_op + 3) 0 or 1: delta of each operation, then of three lattice translations.
    """

    choices: IntArray

    @property
    def weak(self) -> IntArray:
        """(n_choice, 3) delta of the lattice translations: the weak indices."""
        return self.choices[:, -3:]

    def of(self, operation: int, cell: Sequence[int] | IntArray = (0, 0, 0)) -> IntArray:
        """(n_choice,) delta of an operation followed by a lattice translation."""
        return np.asarray((self.choices[:, operation] + self.weak @ np.asarray(cell)) % 2)

    def where(self, mask: BoolArray) -> LayerParities:
        """Some of the choices."""
        return replace(self, choices=self.choices[mask])


def find_layer_parities(rotations: IntArray, translations: FloatArray) -> LayerParities:
    """Every delta that a space group allows.

    Parameters
    ----------
    rotations, translations
        (n, 3, 3) and (n, 3), a group modulo lattice translations.

    Raises
    ------
    ValueError
        The operations are no group, or the cell repeats a much smaller one.
    """
    n = len(rotations)
    table, cells = multiplication_table(rotations, translations, np.zeros(n, dtype=bool))
    if (table < 0).any():
        raise ValueError("the operations are not closed")
    rows = []
    for b in _generators(table):
        block = np.zeros((n, n + 3), dtype=np.int64)
        block[np.arange(n), np.arange(n)] += 1
        block[:, b] += 1
        block[np.arange(n), table[:, b]] += 1
        block[:, n:] = cells[:, b]
        # g {1|t} = {1|W t} g: a translation and its image cross alike
        turned = np.zeros((3, n + 3), dtype=np.int64)
        turned[:, n:] = rotations[b].T - np.eye(3, dtype=np.int64)
        rows += [block, turned]
    free = _null_space(np.concatenate(rows) % 2)
    if len(free) > MOST_FREE:
        raise ValueError("the cell repeats a much smaller one")
    picks = np.array(list(np.ndindex((2,) * len(free))), dtype=np.int64)
    return LayerParities(np.asarray(picks.reshape(-1, len(free)) @ free % 2))


def _generators(table: IntArray) -> list[int]:
    """Operations whose products are all of them; delta(g b) for these b says everything."""
    n = len(table)
    neutral = int(np.flatnonzero(np.all(table == np.arange(n), axis=1))[0])
    chosen, members = [neutral], {neutral}
    for g in range(n):
        if g in members:
            continue
        chosen.append(g)
        while True:
            listed = sorted(members | {g})
            grown = set(np.unique(table[np.ix_(listed, listed)]).tolist()) | set(listed)
            if grown == members:
                break
            members = grown
    return chosen


def _null_space(matrix: IntArray) -> IntArray:
    """(n_free, n_column) basis of the solutions of matrix x = 0 over GF(2)."""
    rows = np.unique(np.asarray(matrix, dtype=np.int64), axis=0).astype(bool)
    n_column = rows.shape[1]
    pivots: list[int] = []
    for column in range(n_column):
        rank = len(pivots)
        below = np.flatnonzero(rows[rank:, column])
        if not len(below):
            continue
        first = rank + int(below[0])
        rows[[rank, first]] = rows[[first, rank]]
        others = rows[:, column].copy()
        others[rank] = False
        rows[others] ^= rows[rank]
        pivots.append(column)
    free = [c for c in range(n_column) if c not in pivots]
    basis = np.zeros((len(free), n_column), dtype=np.int64)
    for i, column in enumerate(free):
        basis[i, column] = 1
        basis[i, pivots] = rows[: len(pivots), column]
    return basis
