"""Wigner-Seitz shifts: which supercell image of each hopping is meant, and H(R) with it chosen.

On a mesh of N1 N2 N3 k-points H_mn(R) is only known up to supercell vectors T: R and R + T are the
same on the mesh and differ between its points. Wannier90's `use_ws_distance` takes the T that
bring the two Wannier functions closest together and shares the element among ties.
"""

from __future__ import annotations

from itertools import product

import numpy as np
from ase.geometry import minkowski_reduce

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from topovet.intake.lattice_keys import check_lattice_vectors, vector_keys, vectors_of_keys
from topovet.intake.records import HamiltonianFile, WsShifts

CHUNK_ROWS = 32_768
"""Hoppings handled at a time; each needs 27 distances."""

_NEAR = np.array(list(product((-1, 0, 1), repeat=3)), dtype=np.int64)


def rebuild_shifts(
    r_cells: IntArray,
    centres_frac: FloatArray,
    mp_grid: tuple[int, int, int],
    cell: FloatArray,
    *,
    tol: float = 1e-5,
    search_size: tuple[int, int, int] = (2, 2, 2),
) -> WsShifts:
    """The shifts Wannier90 would have written, from the centres of the Wannier functions.

    For each (R, m, n): the supercell vectors T that minimise |tau_n + R + T - tau_m|, ties within
    tol shared. The minimum is found exactly, in a Minkowski-reduced supercell, where the images
    next to the rounded one suffice: no coordinate of a point of the Voronoi cell exceeds 1 there
    (Nguyen and Stehle). Wannier90 looks no further than search_size + 1 supercells away;
    where that box cuts the answer off, its own search is repeated, so the two agree always.

    Parameters
    ----------
    r_cells
        (n_r, 3) lattice vectors of the Hamiltonian file, in its order.
    centres_frac
        (n_wann, 3) centres, fractional in the cell, not wrapped.
    mp_grid
        Mesh the Wannier functions were made on; 1 along a non-periodic direction.
    cell
        (3, 3) angstrom, rows.
    tol
        `ws_distance_tol` of Wannier90, angstrom.
    search_size
        `ws_search_size` of Wannier90.

    Returns
    -------
    WsShifts
        Shifts of each element in ascending lexicographic order.

    References
    ----------
    Pizzi et al., J. Phys.: Condens. Matter 32, 165902 (2020), doi:10.1088/1361-648X/ab51ff,
    section on `use_ws_distance`; Nguyen and Stehle, ACM Trans. Algorithms 5, 46 (2009),
    doi:10.1145/1597036.1597050.
    """
    r_cells = np.asarray(r_cells, dtype=np.int64).reshape(-1, 3)
    centres = np.asarray(centres_frac, dtype=float).reshape(-1, 3)
    search = _ImageSearch(cell, mp_grid, tol, search_size)
    n_r, n_wann = len(r_cells), len(centres)
    n_pairs = n_wann * n_wann
    counts = np.empty(n_r * n_pairs, dtype=np.int64)
    shifts = []
    for start in range(0, len(counts), CHUNK_ROWS):
        element = np.arange(start, min(start + CHUNK_ROWS, len(counts)))
        r, pair = np.divmod(element, n_pairs)
        m, n = np.divmod(pair, n_wann)
        rows, images = search.nearest(r_cells[r] + centres[n] - centres[m])
        counts[element] = np.bincount(rows, minlength=len(element))
        shifts.append(images * search.mesh)
    return WsShifts(
        r_cells,
        counts.reshape(n_r, n_wann, n_wann),
        np.concatenate(shifts) if shifts else np.empty((0, 3), dtype=np.int64),
    )


def apply_shifts(
    hamiltonian: HamiltonianFile, shifts: WsShifts | None
) -> tuple[IntArray, ComplexArray]:
    """H(R) with every weight applied, on the R list that the shifts lead to.

    Each element goes to its R + T with weight 1/(ndegen(R) N_T), so that
    H(k) = sum_R exp(2 pi i k.R) H(R) holds with no further factor. Duplicate R are kept apart
    without shifts and summed with them; their sum is the same.

    Parameters
    ----------
    hamiltonian
        As read.
    shifts
        For the same R list in the same order; None leaves R as it is.

    Returns
    -------
    r_cells
        (n, 3) in file order without shifts, lexicographic with them.
    h_r
        (n, n_wann, n_wann) eV. Beside it only the shifts of one R are held at a time.

    Raises
    ------
    InputError
        A lattice vector that no Hamiltonian reaches to.
    ValueError
        The shifts belong to another Hamiltonian.
    """
    check_lattice_vectors(hamiltonian.r_cells, hamiltonian.file)
    weights = 1.0 / hamiltonian.degeneracies
    if shifts is None:
        return hamiltonian.r_cells.copy(), hamiltonian.h_r * weights[:, None, None]
    _check_fit(hamiltonian, shifts)
    n_r, n_wann = len(hamiltonian.r_cells), hamiltonian.n_wann
    r_keys = vector_keys(hamiltonian.r_cells)
    ends = np.cumsum(shifts.counts.reshape(n_r, -1).sum(axis=1))
    parts = [slice(a, b) for a, b in zip(np.r_[0, ends[:-1]], ends, strict=True)]
    new_keys = np.unique(
        np.concatenate(
            [np.unique(vector_keys(shifts.shifts[parts[r]])) + r_keys[r] for r in range(n_r)]
        )
    )
    h_new = np.zeros((len(new_keys), n_wann * n_wann), dtype=np.complex128)
    for r, part in enumerate(parts):
        target = np.searchsorted(new_keys, vector_keys(shifts.shifts[part]) + r_keys[r])
        shared_by = shifts.counts[r].reshape(-1)
        element = np.repeat(np.arange(n_wann * n_wann), shared_by)
        share = hamiltonian.h_r[r].reshape(-1) * (weights[r] / shared_by)
        # The shifts of one element differ, so no (target, element) repeats within one R.
        h_new[target, element] += share[element]
    return vectors_of_keys(new_keys), h_new.reshape(-1, n_wann, n_wann)


class _ImageSearch:
    """Nearest supercell images of vectors, for one supercell."""

    def __init__(
        self,
        cell: FloatArray,
        mp_grid: tuple[int, int, int],
        tol: float,
        search_size: tuple[int, int, int],
    ) -> None:
        self.mesh = np.asarray(mp_grid, dtype=np.int64)
        self.tol = tol
        self.reach = np.asarray(search_size, dtype=np.int64) + 1
        self.supercell = np.asarray(cell, dtype=float) * self.mesh[:, None]
        reduced, operation = minkowski_reduce(self.supercell)
        self.reduced = np.asarray(reduced, dtype=float)
        self.operation = np.asarray(operation, dtype=np.int64)
        self.to_reduced = self.supercell @ np.linalg.inv(self.reduced)

    def nearest(self, separation_frac: FloatArray) -> tuple[IntArray, IntArray]:
        """Images in units of the supercell, sorted: (n,) row of separation_frac, (n, 3) image."""
        separation = separation_frac / self.mesh
        rows, images = self._exact(separation)
        cut_off = self._beyond_reach(rows, images)
        if cut_off.any():
            kept = ~cut_off[rows]
            far_rows, far_images = self._within_reach(separation, np.flatnonzero(cut_off))
            rows = np.concatenate([rows[kept], far_rows])
            images = np.concatenate([images[kept], far_images])
        order = np.lexsort((images[:, 2], images[:, 1], images[:, 0], rows))
        return rows[order], images[order]

    def _exact(self, separation: FloatArray) -> tuple[IntArray, IntArray]:
        in_reduced = separation @ self.to_reduced
        home = -np.rint(in_reduced).astype(np.int64)
        rest = (in_reduced + home) @ self.reduced
        lengths = _distances(rest, _NEAR.astype(float) @ self.reduced)
        rows, near = np.nonzero(lengths - lengths.min(axis=1)[:, None] < self.tol)
        return rows, (home[rows] + _NEAR[near]) @ self.operation

    def _beyond_reach(self, rows: IntArray, images: IntArray) -> BoolArray:
        """Rows for which Wannier90's box might not hold the same set of images."""
        starts = np.flatnonzero(np.diff(rows, prepend=-1))
        low = np.minimum.reduceat(images, starts, axis=0)
        high = np.maximum.reduceat(images, starts, axis=0)
        outside = (low < -self.reach) | (high > self.reach) | (high - low > self.reach)
        return np.asarray(outside.any(axis=1))

    def _within_reach(self, separation: FloatArray, chosen: IntArray) -> tuple[IntArray, IntArray]:
        """Wannier90's own two passes: the best image in a box, then its ties in a box round it.

        Not the best of the second box: an image nearer than the first pass could reach is no tie.
        """
        box = np.array(list(product(*(range(-n, n + 1) for n in self.reach))), dtype=np.int64)
        vectors: FloatArray = box.astype(float) @ self.supercell
        step = max(1, CHUNK_ROWS * len(_NEAR) // len(box))
        all_rows, all_images = [], []
        for start in range(0, len(chosen), step):
            rows = chosen[start : start + step]
            lengths = _distances(separation[rows] @ self.supercell, vectors)
            first = box[np.argmin(lengths, axis=1)]
            again = _distances((separation[rows] + first) @ self.supercell, vectors)
            ties, near = np.nonzero(np.abs(again - lengths.min(axis=1)[:, None]) < self.tol)
            all_rows.append(rows[ties])
            all_images.append(first[ties] + box[near])
        return np.concatenate(all_rows), np.concatenate(all_images)


def _distances(points: FloatArray, vectors: FloatArray) -> FloatArray:
    """(n, n_vectors) lengths |point + vector| as one matrix product."""
    squares = 2.0 * points @ vectors.T
    squares += (points**2).sum(axis=1)[:, None]
    squares += (vectors**2).sum(axis=1)
    return np.asarray(np.sqrt(squares.clip(min=0.0)))


def _check_fit(hamiltonian: HamiltonianFile, shifts: WsShifts) -> None:
    if not np.array_equal(shifts.r_cells, hamiltonian.r_cells):
        raise ValueError("the shifts belong to another list of R")
    if shifts.counts.shape != hamiltonian.h_r.shape:
        raise ValueError("the shifts belong to another number of Wannier functions")
    if int(shifts.counts.sum()) != len(shifts.shifts):
        raise ValueError("the shifts do not add up to their counts")
