"""Green's functions of half-crystals by decimation of principal layers.

Layers ... -1, 0, 1 ... with H inside each and T from one to the next; every step removes every
second layer, so that i steps reach 2^i layers deep:

    g = (E - eps)^-1,   eps_u += a g b,   eps_l += b g a,   eps += a g b + b g a,
    a <- a g a,   b <- b g b

from eps = eps_u = eps_l = H, a = T, b = T†. In the end (E - eps_u)^-1 is the Green's function on
the outermost layer of the half-crystal of layers 0, 1, 2 ... ("upper"), (E - eps_l)^-1 that of
layers ... -1, 0 ("lower"), (E - eps)^-1 that of a layer deep inside.

References
----------
Lopez Sancho, Lopez Sancho, Rubio, J. Phys. F 15, 851 (1985), doi:10.1088/0305-4608/15/4/009
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray

MAX_STEPS = 60
"""Steps after which the coupling counts as not decaying; 2^60 layers."""

CONVERGED = 1e-10
"""Coupling left, relative to T, at which the layers count as apart."""

ARRAYS_PER_ENERGY = 12
"""Matrices of the size of a layer that one energy takes while it is decimated."""


@dataclass(frozen=True, slots=True, eq=False)
class Decimated:
    """Effective Hamiltonians of the outermost layers.

    Attributes
    ----------
    upper, lower, bulk
        (n, size, size) eps_u, eps_l and eps in eV: the Green's function is (E - eps)^-1.
    converged
        (n,) whether the coupling died out.
    steps
        Steps that the slowest took.
    """

    upper: ComplexArray
    lower: ComplexArray
    bulk: ComplexArray
    converged: BoolArray
    steps: int


def decimate(
    inside: ComplexArray, across: ComplexArray, energy: ComplexArray | FloatArray
) -> Decimated:
    """Decimate a batch.

    Parameters
    ----------
    inside, across
        (n, size, size) H and T in eV.
    energy
        (n,) in eV. With a positive imaginary part the retarded function is found at any energy; a
        real one must lie in the gap of the bulk at its k_par, else the coupling never dies out and
        `converged` says so. It may not be an eigenvalue of a slab of 2^i - 1 layers to the last
        bit; next to one the result loses digits, no more.

    Notes
    -----
    Memory: `ARRAYS_PER_ENERGY` x 16 size^2 bytes for each energy; the caller cuts batches.
    """
    size = inside.shape[1]
    bulk, upper, lower = inside.copy(), inside.copy(), inside.copy()
    a, b = across.copy(), across.conj().transpose(0, 2, 1).copy()
    scale = np.maximum(np.abs(across).max(axis=(1, 2)), np.finfo(float).tiny)
    active = np.arange(len(inside))
    converged = np.zeros(len(inside), dtype=bool)
    eye = np.eye(size)
    steps = 0
    while len(active) and steps < MAX_STEPS:
        steps += 1
        resolvent = np.asarray(energy)[active, None, None] * eye - bulk[active]
        solved = np.linalg.solve(resolvent, np.concatenate([a, b], axis=2))
        g_a, g_b = solved[:, :, :size], solved[:, :, size:]
        with np.errstate(over="ignore", invalid="ignore"):  # see below
            down, up = a @ g_b, b @ g_a
            upper[active] += down
            lower[active] += up
            bulk[active] += down + up
            a, b = a @ g_a, b @ g_b
        left = np.maximum(np.abs(a).max(axis=(1, 2)), np.abs(b).max(axis=(1, 2)))
        done = left < CONVERGED * scale[active]
        converged[active[done]] = True
        # couplings that grow without bound end as NaN; they have not converged
        kept = ~done & np.isfinite(left)
        a, b, active = a[kept], b[kept], active[kept]
    return Decimated(upper, lower, bulk, converged, steps)


def greens_functions(energy: ComplexArray, effective: ComplexArray) -> ComplexArray:
    """(E - eps)^-1, (n, size, size) in 1/eV."""
    eye = np.eye(effective.shape[1])
    g = np.linalg.inv(np.asarray(energy)[:, None, None] * eye - effective)
    return np.asarray(g, dtype=np.complex128)
