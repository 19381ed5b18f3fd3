"""Integer lattice vectors as single integers: looked up, sorted and made unique without loops."""

from __future__ import annotations

import numpy as np

from topovet.arrays import IntArray
from topovet.errors import InputError

LARGEST_COMPONENT = 2**19
"""Largest |component| a file may hold; the sum of two such vectors still has a unique key."""

_BASE = 2**21
_HALF = _BASE // 2


def check_lattice_vectors(r_cells: IntArray, file: str) -> None:
    """Refuse lattice vectors that no Hamiltonian reaches to: without keys they cannot be handled.

    Raises
    ------
    InputError
        A component of 2^19 or more.
    """
    too_large = (np.abs(r_cells) >= LARGEST_COMPONENT).any(axis=1)
    if too_large.any():
        vector = " ".join(str(component) for component in r_cells[int(np.argmax(too_large))])
        raise InputError(
            file,
            found=f"R = {vector}",
            expected=f"lattice vectors with components below {LARGEST_COMPONENT}",
            todo="copy the file again or let Wannier90 write it again",
        )


def vector_keys(vectors: IntArray) -> IntArray:
    """One integer per lattice vector, linear in the vector and ordered lexicographically.

    key(u + v) = key(u) + key(v), so shifted vectors need no second pass over their components.

    Parameters
    ----------
    vectors
        (n, 3) integers, each |component| < 2^20.

    Returns
    -------
    IntArray
        (n,) keys, one to one.

    Raises
    ------
    ValueError
        A component is too large: readers must refuse it (`LARGEST_COMPONENT`).
    """
    vectors = np.asarray(vectors, dtype=np.int64).reshape(-1, 3)
    if vectors.size and max(-int(vectors.min()), int(vectors.max())) >= _HALF:
        raise ValueError("lattice vector components must stay below 2^20")
    return np.asarray((vectors[:, 0] * _BASE + vectors[:, 1]) * _BASE + vectors[:, 2])


def vectors_of_keys(keys: IntArray) -> IntArray:
    """(n, 3) lattice vectors of (n,) keys: the inverse of `vector_keys`."""
    vectors = np.empty((len(keys), 3), dtype=np.int64)
    rest = np.asarray(keys, dtype=np.int64)
    for column in (2, 1):
        vectors[:, column] = (rest + _HALF) % _BASE - _HALF
        rest = (rest - vectors[:, column]) // _BASE
    vectors[:, 0] = rest
    return vectors


def first_rows_of(r_cells: IntArray, wanted: IntArray) -> IntArray:
    """Row of r_cells that holds each wanted vector first; -1 where none does.

    Parameters
    ----------
    r_cells
        (n_r, 3) integers, duplicates allowed.
    wanted
        (n, 3) integers.

    Returns
    -------
    IntArray
        (n,) row numbers.
    """
    keys, sought = vector_keys(r_cells), vector_keys(wanted)
    if len(keys) == 0:
        return np.full(len(sought), -1, dtype=np.int64)
    order = np.argsort(keys, kind="stable")
    at = np.searchsorted(keys, sought, sorter=order).clip(max=len(keys) - 1)
    found = order[at]
    return np.asarray(np.where(keys[found] == sought, found, -1), dtype=np.int64)
