"""Eigenvalues and eigenvectors at many k: threads over batches, BLAS held to one thread each."""

from __future__ import annotations

import functools
import itertools
import os
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import AbstractContextManager
from typing import TypeVar

import numpy as np
from threadpoolctl import ThreadpoolController

from topovet.arrays import ComplexArray, FloatArray
from topovet.model.fourier import BlochSum, chunks_of_k

Result = TypeVar("Result")

SMALL_WORK = 75_000
"""n_k (n_orb^3 + 250) below which threads cost more than they save: a millisecond or two."""

FEWEST_PARTS = 8
"""Batches that a list of k is cut into where it is long enough: work for as many threads."""


@functools.cache
def worker_count() -> int:
    """Threads to use: the processors this process may run on, or TOPOVET_THREADS."""
    wanted = os.environ.get("TOPOVET_THREADS", "")
    if wanted.isdigit() and int(wanted) > 0:
        return int(wanted)
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


@functools.cache
def _blas() -> ThreadpoolController:
    return ThreadpoolController()


def one_blas_thread() -> AbstractContextManager[object]:
    """While it is open, each BLAS call stays on the thread that makes it."""
    context: AbstractContextManager[object] = _blas().limit(limits=1)
    return context


def map_threads(function: Callable[..., Result], items: Sequence[object]) -> list[Result]:
    """function(item) for every item on worker threads, in order, one BLAS thread each."""
    with one_blas_thread():
        if len(items) < 2 or worker_count() < 2:
            return [function(item) for item in items]
        with ThreadPoolExecutor(worker_count()) as pool:
            return list(pool.map(function, items))


def eigenvalues(bloch: BlochSum, k_frac: FloatArray) -> FloatArray:
    """Energies (n_k, n_orb) in eV, ascending, for k_frac (n_k, d)."""
    k_frac = np.asarray(k_frac, dtype=float)
    parts = map_threads(
        lambda part: np.linalg.eigvalsh(bloch.lower_at(k_frac[part])),
        _parts(len(k_frac), bloch.n_orb),
    )
    return np.concatenate(parts) if parts else np.empty((0, bloch.n_orb))


def eigenstates(bloch: BlochSum, k_frac: FloatArray) -> tuple[FloatArray, ComplexArray]:
    """Energies (n_k, n_orb) and eigenvectors (n_k, n_orb, n_orb), [k, :, b] being band b."""
    k_frac = np.asarray(k_frac, dtype=float)
    parts = map_threads(
        lambda part: np.linalg.eigh(bloch.lower_at(k_frac[part])), _parts(len(k_frac), bloch.n_orb)
    )
    energies = np.concatenate([part[0] for part in parts])
    return energies, np.concatenate([part[1] for part in parts])


def mesh_points(mesh: Sequence[int]) -> FloatArray:
    """(n_1 n_2 n_3, 3) points i/n of a mesh that holds the origin, last component fastest."""
    axes = np.meshgrid(*(np.arange(n) / n for n in mesh), indexing="ij")
    return np.stack(axes, axis=-1).reshape(-1, len(mesh))


def mesh_eigenvalues(bloch: BlochSum, mesh: tuple[int, int, int], *, even: bool) -> FloatArray:
    """Energies on a mesh that holds the origin, (n_1, n_2, n_3, n_orb) eV.

    The first component is summed once for each plane, so that a point costs only the R vectors of
    the plane. With `even` set, E(-k) = E(k) (time reversal or inversion) is used and only the
    planes 0 <= k_1 <= 1/2 are solved.

    Parameters
    ----------
    bloch
        Three-dimensional Fourier sum.
    mesh
        Points along each reciprocal vector.
    even
        Whether E(-k) = E(k) may be assumed.
    """
    n_1, n_2, n_3 = mesh
    plane_k = mesh_points((n_2, n_3))
    solved = range(n_1 // 2 + 1) if even else range(n_1)

    def plane(i: int) -> FloatArray:
        part = bloch.partial((0,), np.array([i / n_1]))
        return np.concatenate(
            [
                np.linalg.eigvalsh(part.lower_at(plane_k[s]))
                for s in chunks_of_k(len(plane_k), part.n_orb)
            ]
        )

    energies = np.empty((n_1, n_2, n_3, bloch.n_orb))
    for i, values in zip(solved, map_threads(plane, solved), strict=True):
        energies[i] = values.reshape(n_2, n_3, -1)
    if even:
        back_2, back_3 = -np.arange(n_2) % n_2, -np.arange(n_3) % n_3
        for i in range(n_1 // 2 + 1, n_1):
            energies[i] = energies[n_1 - i][np.ix_(back_2, back_3)]
    return energies


def mesh_solves(mesh: tuple[int, int, int], *, even: bool) -> int:
    """Eigenvalue problems that `mesh_eigenvalues` solves."""
    n_1, n_2, n_3 = mesh
    return (n_1 // 2 + 1 if even else n_1) * n_2 * n_3


def _parts(n_k: int, n_orb: int) -> list[slice]:
    """Chunks within the memory bound, a few of them even where fewer would do.

    How k are cut must not depend on the machine: the size of a batch moves the last digits of
    H(k), and the same input would give other bytes on another number of processors.
    """
    slices = chunks_of_k(n_k, n_orb)
    if n_k * (n_orb**3 + 250) < SMALL_WORK:
        return slices
    if len(slices) < FEWEST_PARTS <= n_k // 2:
        edges = np.linspace(0, n_k, FEWEST_PARTS + 1).astype(int)
        return [slice(a, b) for a, b in itertools.pairwise(edges)]
    return slices
