"""A first look at the gap: a mesh, then Newton steps from its lowest points.

Everything here is an attained value. The smallest direct gap that was met is an upper bound of the
true one; nothing is proved, and the result says so.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.ndimage import minimum_filter

from topovet.arrays import BoolArray, FloatArray
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.spectrum.descent import FINE_MULTIPLET, Objective, descend
from topovet.spectrum.eigen import mesh_points
from topovet.spectrum.results import GapSample

MESH_SPACING = {"quick": 0.2, "standard": 0.1, "thorough": 0.05}
"""Largest distance of mesh points along a reciprocal vector, 1/angstrom, by effort."""

EVEN_BANDS_MEV = 0.1
"""E(-k) = E(k) halves a mesh only where time reversal holds this well."""

GAPLESS_EV = 1e-4
"""Attained direct gaps below this count as closed: refinement of a true node goes far below."""

UNRESOLVED_EV = 1e-3
"""Attained direct gaps between `GAPLESS_EV` and this are too small for a sampled judgement."""

N_LOWEST, N_MINIMA = 96, 24
"""Searches start from so many of the lowest mesh points, and of the lowest local minima among them.
A narrow cone between mesh points shows in a low value, often not in a local minimum: in Sb the
smallest gap is reached from the 4th and 5th lowest of 3,240 mesh points, neither of them one."""

IMAGE_EV, MOST_IMAGES = 5e-5, 4
"""Mesh points as equal as this are likely images of each other by symmetry: a few stand for all."""

FIRST_ROUNDS, LAST_ROUNDS = 4, 30
N_FOLLOWED = 16
"""After the first rounds only so many of the lowest are followed to the end."""


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

    The lowest mesh points are followed downhill, for the direct gap, the valence-band maximum and
    the conduction-band minimum separately.

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
    direct = _search(bloch, Objective(filling, 1, -1), mesh_energies)
    valence = _search(bloch, Objective(filling, 0, -1), mesh_energies)
    conduction = _search(bloch, Objective(filling, 1, 0), mesh_energies)
    indirect_ev = conduction.value + valence.value
    return GapSample(
        direct_ev=direct.value,
        direct_k=direct.k_frac,
        indirect_ev=indirect_ev,
        vbm_ev=-valence.value,
        vbm_k=valence.k_frac,
        cbm_ev=conduction.value,
        cbm_k=conduction.k_frac,
        mesh=(n_1, n_2, n_3),
        mesh_direct_ev=float(Objective(filling, 1, -1).of(mesh_energies).min()),
        status=gap_status(direct.value, indirect_ev),
        n_solves=n_solves + direct.n_solves + valence.n_solves + conduction.n_solves,
    )


def lowest_direct_gaps(
    bloch: BlochSum, mesh_energies: FloatArray, filling: int
) -> tuple[FloatArray, FloatArray]:
    """Local minima of the direct gap below the lowest mesh points: (n,) eV ascending, (n, 3) k.

    Parameters
    ----------
    bloch, mesh_energies, filling
        As for `sample_gap`.
    """
    objective = Objective(filling, 1, -1)
    start = _starting_points(objective.of(mesh_energies))
    first = descend(bloch, objective, start, max_rounds=FIRST_ROUNDS)
    kept = np.argsort(first.values, kind="stable")[:N_FOLLOWED]
    rest = descend(bloch, objective, first.k_frac[kept], max_rounds=LAST_ROUNDS)
    order = np.argsort(rest.values, kind="stable")
    return rest.values[order], _wrapped(rest.k_frac[order])


def gap_status(direct_ev: float, indirect_ev: float) -> str:
    """ "gapless", "unresolved", "semimetal-direct-gap" or "insulator" from attained gaps in eV."""
    if direct_ev < GAPLESS_EV:
        return "gapless"
    if direct_ev < UNRESOLVED_EV:
        return "unresolved"
    return "insulator" if indirect_ev > 0 else "semimetal-direct-gap"


@dataclass(frozen=True, slots=True)
class _Found:
    """Lowest value of an objective, eV, where, and the solves spent on it."""

    value: float
    k_frac: tuple[float, float, float]
    n_solves: int


def _search(bloch: BlochSum, objective: Objective, mesh_energies: FloatArray) -> _Found:
    start = _starting_points(objective.of(mesh_energies))
    first = descend(bloch, objective, start, max_rounds=FIRST_ROUNDS)
    kept = np.argsort(first.values, kind="stable")[:N_FOLLOWED]
    rest = descend(bloch, objective, first.k_frac[kept], max_rounds=LAST_ROUNDS)
    last = descend(bloch, objective, rest.k_frac, max_rounds=LAST_ROUNDS, multiplet=FINE_MULTIPLET)
    leader = int(last.values.argmin())
    x, y, z = (float(c) for c in _wrapped(last.k_frac[leader]))
    n_solves = first.n_solves + rest.n_solves + last.n_solves
    return _Found(float(last.values[leader]), (x, y, z), n_solves)


def _starting_points(on_mesh: FloatArray) -> FloatArray:
    """(n, 3) k of the lowest points and of the lowest local minima of a periodic mesh."""
    flat = on_mesh.reshape(-1)
    is_lowest = (on_mesh <= minimum_filter(on_mesh, size=3, mode="wrap") + 1e-9).reshape(-1)
    order = np.argsort(flat, kind="stable")
    order = order[_few_of_each(flat[order])]
    minima = order[is_lowest[order]][:N_MINIMA]
    chosen = np.unique(np.concatenate([order[:N_LOWEST], minima]))
    return np.asarray(mesh_points(on_mesh.shape)[chosen])


def _few_of_each(ascending: FloatArray) -> BoolArray:
    """Which of the values to keep so that `MOST_IMAGES` stand for each set of nearly equal ones."""
    new_set = np.diff(ascending, prepend=-np.inf) > IMAGE_EV
    position = np.arange(len(ascending))
    first = np.maximum.accumulate(np.where(new_set, position, 0))
    return np.asarray(position - first < MOST_IMAGES)


def _wrapped(k_frac: FloatArray) -> FloatArray:
    """The same k with components in (-1/2, 1/2], to nine decimals."""
    return np.asarray(np.round(0.5 - np.round((0.5 - k_frac) % 1.0, 9) % 1.0, 9) + 0.0)
