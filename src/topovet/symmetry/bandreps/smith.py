"""Smith normal form over the integers, with the unimodular matrices that bring it about.

Python integers throughout: entries of the transformations may outgrow 64 bits.

References
----------
Smith, Phil. Trans. R. Soc. 151, 293 (1861), doi:10.1098/rstl.1861.0016.
"""

from __future__ import annotations

import functools
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

Integers = npt.NDArray[Any]
"""Integer matrices of dtype object."""


@dataclass(frozen=True, slots=True, eq=False)
class SmithForm:
    """U A V = D.

    Attributes
    ----------
    left, right
        (m, m) and (n, n) unimodular U and V, integers of dtype object.
    divisors
        The non-zero diagonal of D: positive, each a divisor of the next.
    """

    left: Integers
    right: Integers
    divisors: tuple[int, ...]

    @property
    def rank(self) -> int:
        return len(self.divisors)


def smith_normal_form(matrix: Sequence[Sequence[int]] | npt.NDArray[Any]) -> SmithForm:
    """Smith normal form of an integer matrix.

    Parameters
    ----------
    matrix
        (m, n) integers, m and n at least 1.
    """
    a = np.array(matrix, dtype=object)
    m, n = a.shape
    # one table holds A, U and V, so that an operation on rows or columns is one statement
    table = np.zeros((m + n, n + m), dtype=object)
    table[:m, :n] = a
    table[:m, n:] = np.eye(m, dtype=int).astype(object)
    table[m:, :n] = np.eye(n, dtype=int).astype(object)
    rank = 0
    while rank < min(m, n) and table[rank:m, rank:n].any():
        _bring_smallest_to(table, rank, m, n)
        if _clear_cross(table, rank, m, n) and _divides_rest(table, rank, m, n):
            if table[rank, rank] < 0:
                table[rank] = -table[rank]
            rank += 1
    divisors = tuple(int(table[i, i]) for i in range(rank))
    return SmithForm(table[:m, n:].copy(), table[m:, :n].copy(), divisors)


def _bring_smallest_to(table: Integers, t: int, m: int, n: int) -> None:
    """Swap the smallest non-zero entry of the rest to the corner."""
    rest = np.abs(table[t:m, t:n])
    nonzero = np.argwhere(rest != 0)
    i, j = min(nonzero.tolist(), key=lambda ij: int(rest[ij[0], ij[1]]))
    table[[t, t + i]] = table[[t + i, t]]
    table[:, [t, t + j]] = table[:, [t + j, t]]


def _clear_cross(table: Integers, t: int, m: int, n: int) -> bool:
    """Subtract multiples of the corner's row and column; True if the cross is then empty."""
    corner = table[t, t]
    quotients = table[t + 1 : m, t] // corner
    rows = np.flatnonzero(quotients != 0)
    table[t + 1 + rows] -= quotients[rows][:, None] * table[t][None, :]
    quotients = table[t, t + 1 : n] // corner
    columns = np.flatnonzero(quotients != 0)
    table[:, t + 1 + columns] -= table[:, t][:, None] * quotients[columns][None, :]
    return not (table[t + 1 : m, t].any() or table[t, t + 1 : n].any())


def _divides_rest(table: Integers, t: int, m: int, n: int) -> bool:
    """Add a row that the corner does not divide to the corner's; False if there was one."""
    rest = table[t + 1 : m, t + 1 : n] % table[t, t]
    bad = np.argwhere(rest != 0)
    if not len(bad):
        return True
    table[t] += table[t + 1 + bad[0][0]]
    return False


@functools.lru_cache(maxsize=4096)
def small_smith(rows: tuple[tuple[int, ...], ...]) -> SmithForm:
    """The same for a matrix given as nested tuples, remembered: rotations come back often."""
    return smith_normal_form(rows)
