"""A first look at the gap: a mesh, then local refinement of its lowest points.

Everything here is an attained value. The smallest direct gap that was met is an upper bound of the
true one; nothing is proved, and the result says so.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable

import numpy as np
from scipy.ndimage import minimum_filter

from topovet.arrays import FloatArray
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import eigenvalues, mesh_points
from topovet.spectrum.results import GapSample

MESH_SPACING = {"quick": 0.2, "standard": 0.1, "thorough": 0.05}
"""Largest distance of mesh points along a reciprocal vector, 1/angstrom, by effort."""

GAPLESS_EV = 1e-4
"""Attained direct gaps below this count as closed: refinement of a true node goes far below."""

UNRESOLVED_EV = 1e-3
"""Attained direct gaps between `GAPLESS_EV` and this are too small for a sampled judgement."""

N_CANDIDATES = 12
FINEST_STEP = 1e-5
MAX_ROUNDS = 60
THINNING_ROUNDS = (4, 8, 12)
SETTLED_EV = 1e-10

Objective = Callable[[FloatArray], FloatArray]


def choose_mesh(crystal: Crystal, effort: str) -> tuple[int, int, int]:
    """Even numbers of points along the reciprocal vectors, 1 along a non-periodic one."""
    lengths = np.linalg.norm(crystal.reciprocal, axis=1)
    points = [
        max(4, 2 * int(np.ceil(length / MESH_SPACING[effort] / 2))) if is_periodic else 1
        for length, is_periodic in zip(lengths, crystal.periodic, strict=True)
    ]
    return points[0], points[1], points[2]


def sample_gap(
    bloch: BlochSum, mesh_energies: FloatArray, filling: int, *, n_solves: int = 0
) -> GapSample:
    """Direct and indirect gap at a filling, by sampling.

    Local extrema of the mesh are followed downhill with shrinking steps, for the direct gap, the
    valence-band maximum and the conduction-band minimum separately.

    Parameters
    ----------
    bloch
        The Hamiltonian.
    mesh_energies
        (n_1, n_2, n_3, n_orb) eV from `topovet.spectrum.eigen.mesh_eigenvalues`.
    filling
        Occupied bands, 0 < filling < n_orb.
    n_solves
        Eigenvalue problems already spent on the mesh, for the record.
    """
    n_1, n_2, n_3, _ = mesh_energies.shape
    mesh = (n_1, n_2, n_3)
    valence, conduction = mesh_energies[..., filling - 1], mesh_energies[..., filling]
    spent = n_solves

    def search(pick: Callable[[FloatArray], FloatArray]) -> _Found:
        def objective(k_frac: FloatArray) -> FloatArray:
            nonlocal spent
            spent += len(k_frac)
            return pick(eigenvalues(bloch, k_frac))

        return _descend(objective, _local_minima(pick(mesh_energies)), mesh)

    direct, direct_k = search(lambda e: e[..., filling] - e[..., filling - 1])
    minus_vbm, vbm_k = search(lambda e: -e[..., filling - 1])
    cbm, cbm_k = search(lambda e: e[..., filling])
    return GapSample(
        direct_ev=direct,
        direct_k=direct_k,
        indirect_ev=cbm + minus_vbm,
        vbm_ev=-minus_vbm,
        vbm_k=vbm_k,
        cbm_ev=cbm,
        cbm_k=cbm_k,
        mesh=mesh,
        mesh_direct_ev=float((conduction - valence).min()),
        status=gap_status(direct, cbm + minus_vbm),
        n_solves=spent,
    )


def gap_status(direct_ev: float, indirect_ev: float) -> str:
    """ "gapless", "unresolved", "semimetal-direct-gap" or "insulator" from attained gaps in eV."""
    if direct_ev < GAPLESS_EV:
        return "gapless"
    if direct_ev < UNRESOLVED_EV:
        return "unresolved"
    return "insulator" if indirect_ev > 0 else "semimetal-direct-gap"


_Found = tuple[float, tuple[float, float, float]]


def _local_minima(on_mesh: FloatArray) -> FloatArray:
    """(n, 3) k of the lowest local minima on a periodic mesh, lowest first."""
    is_lowest = on_mesh <= minimum_filter(on_mesh, size=3, mode="wrap") + 1e-9
    k_frac = mesh_points(on_mesh.shape)[is_lowest.reshape(-1)]
    order = np.argsort(on_mesh[is_lowest], kind="stable")[:N_CANDIDATES]
    return np.asarray(k_frac[order])


def _descend(objective: Objective, start: FloatArray, mesh: tuple[int, int, int]) -> _Found:
    """Compass search of all candidates together, each with its own shrinking step."""
    in_use = np.array(mesh) > 1
    moves = np.array(list(itertools.product(*([-1, 0, 1] if used else [0] for used in in_use))))
    moves = moves[np.any(moves != 0, axis=1)]
    step = np.where(in_use, 0.5 / np.array(mesh), 0.0)
    k_frac, scale, best = start.copy(), np.ones(len(start)), objective(start)
    for round_number in range(MAX_ROUNDS):
        trial = k_frac[:, None, :] + moves * (scale[:, None, None] * step)
        values = objective(trial.reshape(-1, 3)).reshape(len(k_frac), -1)
        rows, winner = np.arange(len(k_frac)), values.argmin(axis=1)
        improves = values[rows, winner] < best - SETTLED_EV
        k_frac = np.where(improves[:, None], trial[rows, winner], k_frac)
        best = np.where(improves, values[rows, winner], best)
        scale = np.where(improves, scale, scale / 2)
        if round_number in THINNING_ROUNDS:  # follow the better half only
            kept = np.argsort(best, kind="stable")[: max(1, len(best) // 2)]
            k_frac, best, scale = k_frac[kept], best[kept], scale[kept]
        if scale.max() * step.max() < FINEST_STEP:
            break
    leader = int(best.argmin())
    x, y, z = (float(c) for c in _wrapped(k_frac[leader]))
    return float(best[leader]), (x, y, z)


def _wrapped(k_frac: FloatArray) -> FloatArray:
    """The same k with components in (-1/2, 1/2], to six decimals."""
    return np.asarray(0.5 - np.round((0.5 - k_frac) % 1.0, 6) % 1.0)
