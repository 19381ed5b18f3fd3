"""Films: bands of a finite stack of planes, where their states sit, what thickness does."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.boundary.layers import LayerStack
from topovet.boundary.recut import Recut
from topovet.boundary.results import SlabBands, ThicknessSeries
from topovet.spectrum.eigen import map_threads


def slab_hamiltonian(planes: ComplexArray, n_planes: int) -> ComplexArray:
    """H of n_planes planes, (n_k, n_planes n, n_planes n), from H_j (reach + 1, n_k, n, n)."""
    n_k, n = planes.shape[1:3]
    h = np.zeros((n_k, n_planes, n, n_planes, n), dtype=np.complex128)
    for j, block in enumerate(planes):
        for a in range(n_planes - j):
            h[:, a, :, a + j] = block
            if j:
                h[:, a + j, :, a] = block.conj().transpose(0, 2, 1)
    return h.reshape(n_k, n_planes * n, n_planes * n)


def compute_slab_bands(
    stack: LayerStack, cut: Recut, k_par: FloatArray, n_planes: int, *, face_planes: int = 1
) -> SlabBands:
    """Bands of a free-standing film with the weight and spin of every state at its two faces.

    Parameters
    ----------
    stack, cut
        The crystal by planes, and their cell.
    k_par
        (n_k, 2) fractional.
    n_planes
        Lattice planes in the film.
    face_planes
        Planes counted as a face.

    Notes
    -----
    Spin is that of spinors in the order up, down along z of the crystal's Cartesian frame.
    Memory: one film Hamiltonian and its eigenvectors for each thread.
    """

    def solve(k: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        h = slab_hamiltonian(stack.planes_at(k[None]), n_planes)[0]
        energies, states = np.linalg.eigh(h)
        rows = face_planes * stack.n_orb
        faces = (states[:rows], states[len(h) - rows :])
        weights = np.stack([(np.abs(f) ** 2).sum(axis=0) for f in faces])
        spins = np.stack([_spin(f) for f in faces]) if stack.spinful else np.empty((2, 0, 3))
        return energies, weights, spins

    solved = map_threads(solve, list(np.asarray(k_par, dtype=float)))
    weights, spins = (np.stack([s[i] for s in solved]) for i in (1, 2))
    return SlabBands(
        k_par=np.asarray(k_par, dtype=float),
        energies_ev=np.stack([s[0] for s in solved]),
        lower_face=weights[:, 0],
        upper_face=weights[:, 1],
        spin_lower=spins[:, 0] if stack.spinful else None,
        spin_upper=spins[:, 1] if stack.spinful else None,
        n_planes=n_planes,
        thickness_ang=n_planes * cut.spacing_ang,
        face_planes=face_planes,
    )


def compute_thickness_series(
    stack: LayerStack, cut: Recut, k_par: FloatArray, filling: int, n_planes: Sequence[int]
) -> ThicknessSeries:
    """Gap of films at one k_par against their thickness.

    Parameters
    ----------
    filling
        Occupied bands of the bulk; a film of m planes fills m times as many.
    n_planes
        Films to solve.
    """
    gaps = []
    for m in n_planes:
        h = slab_hamiltonian(stack.planes_at(np.asarray(k_par, dtype=float)[None]), m)[0]
        energies = np.linalg.eigvalsh(h)
        gaps.append(float(energies[m * filling] - energies[m * filling - 1]))
    thickness = tuple(m * cut.spacing_ang for m in n_planes)
    k_1, k_2 = (float(c) for c in k_par)
    return ThicknessSeries(thickness, tuple(gaps), (k_1, k_2))


def _spin(states: ComplexArray) -> FloatArray:
    """(n_states, 3) expectation of sigma over the rows given, spin pairs next to each other."""
    up, down = states[0::2], states[1::2]
    flip = (up.conj() * down).sum(axis=0)
    z = (np.abs(up) ** 2 - np.abs(down) ** 2).sum(axis=0)
    return np.stack([2 * flip.real, 2 * flip.imag, z], axis=1)
