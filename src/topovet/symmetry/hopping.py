"""What an operation makes of a Hamiltonian: g H g^-1 over R and at k, and how far it is from H.

For the conventions see `symmetry.operators`. An element <m 0|H|n R> moves in three steps: to the
cell W R + L_n - L_m; the matrix M of the operation mixes the functions; and on to R' + C_m - C_n,
where C counts cells from the first function of a site. Time reversal conjugates H first.

M connects few functions, those of a site with those of its image, and is multiplied block by block.
Of each pair R, -R one is enough: H(-R) = H(R)† holds for the image as well.
"""

from __future__ import annotations

import itertools

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from topovet.arrays import ComplexArray, FloatArray, IntArray, largest_spectral_norm
from topovet.model.hamiltonian import TightBindingModel, r_index
from topovet.symmetry.operators import WannierOperator
from topovet.units import MEV_PER_EV

Block = tuple[slice | IntArray, slice | IntArray]


def transformed_hopping(
    model: TightBindingModel, operator: WannierOperator
) -> tuple[IntArray, ComplexArray]:
    """g H g^-1 on its own list of R.

    Returns
    -------
    tuple
        (n, 3) distinct lattice vectors in lexicographic order, and (n, n_orb, n_orb) eV.
    """
    return _transformed(model.r_cells, model.h_r, operator)


def transformed_half(
    model: TightBindingModel, operator: WannierOperator
) -> tuple[IntArray, ComplexArray]:
    """g H g^-1 without what H(-R) = H(R)† supplies.

    Returns
    -------
    tuple
        (n, 3) lattice vectors, R = 0 first, each before its negative in lexicographic order and
        without it, and (n, n_orb, n_orb) eV.
    """
    middle = model.n_r // 2
    h_half = model.h_r[middle:].copy()
    if model.n_r % 2 == 1:
        h_half[0] *= 0.5  # R = 0 is its own partner
    r_new, part = _transformed(model.r_cells[middle:], h_half, operator)
    # the image of one R may fall on both sides: what is on the wrong one is turned over
    closed = np.unique(np.concatenate([r_new, -r_new, np.zeros((1, 3), np.int64)]), axis=0)
    r_half = closed[len(closed) // 2 :]
    ahead, behind = r_index(r_half, r_new), r_index(r_half, -r_new)
    whole = np.zeros((len(r_half), *part.shape[1:]), dtype=np.complex128)
    whole[ahead[ahead >= 0]] = part[ahead >= 0]
    whole[behind[behind >= 0]] += part[behind >= 0].conj().transpose(0, 2, 1)
    return r_half, whole


def transformed_at(
    h_k: ComplexArray, operator: WannierOperator, k_frac: FloatArray
) -> ComplexArray:
    """D(k) H(k) D(k)†, to be compared with H(k'): (n_k, n_orb, n_orb) eV.

    Parameters
    ----------
    h_k
        (n_k, n_orb, n_orb) eV, H at k_frac.
    operator
        With time reversal A(k) H(k)* A(k)†.
    k_frac
        (n_k, 3); k' = k_frac @ operator.k_rotation.
    """
    k_image = np.asarray(k_frac, dtype=float) @ operator.k_rotation
    before = np.exp(-2j * np.pi * (k_image @ operator.shifts.T))
    after = np.exp(2j * np.pi * (k_image @ operator.homes.T))
    h_k = h_k.conj() if operator.antiunitary else h_k
    mixed = _mixed(operator.matrix, before[:, :, None] * h_k * before.conj()[:, None, :])
    return np.asarray(after[:, :, None] * mixed * after.conj()[:, None, :])


def real_space_residual_mev(model: TightBindingModel, operator: WannierOperator) -> float:
    """Spectral norm of (g H g^-1 - H)(R), largest over R, meV."""
    r_half, difference = transformed_half(model, operator)
    middle = model.n_r // 2
    at = r_index(r_half, model.r_cells[middle:])
    kept = at >= 0
    difference[at[kept]] -= model.h_r[middle:][kept]
    lost = largest_spectral_norm(model.h_r[middle:][~kept])
    return MEV_PER_EV * max(largest_spectral_norm(difference), lost)


def _transformed(
    r_cells: IntArray, h_r: ComplexArray, operator: WannierOperator
) -> tuple[IntArray, ComplexArray]:
    """The image of any list of H(R); linear over the reals."""
    r_new, moved = _moved(r_cells @ operator.rotation.T, h_r, -operator.shifts)
    if operator.antiunitary:
        moved = moved.conj()
    return _moved(r_new, _mixed(operator.matrix, moved), operator.homes)


def _moved(
    r_cells: IntArray, h_r: ComplexArray, cell_of: IntArray
) -> tuple[IntArray, ComplexArray]:
    """Element (m, n) of each H(R) moved to R + c_m - c_n, on its own list of R, in order."""
    if np.all(cell_of == cell_of[0]):
        order = np.lexsort(r_cells.T[::-1])
        in_order = bool(np.all(order[:-1] < order[1:]))
        return (r_cells, h_r) if in_order else (r_cells[order], h_r[order])
    starts = np.flatnonzero(np.any(np.diff(cell_of, axis=0), axis=1)) + 1
    edges = [0, *starts.tolist(), len(cell_of)]
    runs = [slice(a, b) for a, b in itertools.pairwise(edges)]  # functions with one c
    cells = cell_of[edges[:-1]]
    steps, which = np.unique(
        (cells[:, None, :] - cells[None, :, :]).reshape(-1, 3), axis=0, return_inverse=True
    )
    targets = (r_cells[:, None, :] + steps).reshape(-1, 3)
    r_new = np.unique(targets, axis=0)
    at = r_index(r_new, targets).reshape(len(r_cells), len(steps))
    h_new = np.zeros((len(r_new), *h_r.shape[1:]), dtype=np.complex128)
    for (rows, columns), step in zip(itertools.product(runs, runs), which.reshape(-1), strict=True):
        h_new[at[:, step], rows, columns] = h_r[:, rows, columns]
    return r_new, h_new


def _mixed(matrix: ComplexArray, h_r: ComplexArray) -> ComplexArray:
    """M H(R) M† for every R, (n_r, n_orb, n_orb)."""
    n_r, n_orb = h_r.shape[:2]
    left, mixed = np.empty(h_r.shape, complex), np.empty(h_r.shape, complex)
    blocks = _blocks(matrix)
    for rows, columns in blocks:
        left[:, rows] = matrix[rows][:, columns] @ h_r[:, columns]
    flat, out = left.reshape(n_r * n_orb, n_orb), mixed.reshape(n_r * n_orb, n_orb)
    for rows, columns in blocks:
        out[:, rows] = flat[:, columns] @ matrix[rows][:, columns].conj().T
    return mixed


def _blocks(matrix: ComplexArray) -> list[Block]:
    """Rows and columns that M connects, as slices where they are neighbours."""
    n_orb = len(matrix)
    rows, columns = np.nonzero(matrix)
    links = coo_array((np.ones(len(rows)), (rows, n_orb + columns)), shape=(2 * n_orb, 2 * n_orb))
    n_blocks, label = connected_components(links, directed=False)
    return [
        (
            _as_slice(np.flatnonzero(label[:n_orb] == b)),
            _as_slice(np.flatnonzero(label[n_orb:] == b)),
        )
        for b in range(n_blocks)
    ]


def _as_slice(indices: IntArray) -> slice | IntArray:
    if len(indices) and indices[-1] - indices[0] == len(indices) - 1:
        return slice(int(indices[0]), int(indices[-1]) + 1)
    return indices
