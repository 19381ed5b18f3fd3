"""What a mesh of k-points does to a model: Wigner-Seitz list of R, degeneracies, energies."""

from __future__ import annotations

from itertools import product

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.demo.lattice import LatticeModel

Mesh = tuple[int, int, int]

TIE_ANGSTROM = 1e-5
"""Distances that differ by less are equal, as in Wannier90."""

SEARCHED_SUPERCELLS = 2
"""Supercells on either side in which a nearer image of R is looked for."""

TAIL_EV = 0.02
"""Hopping of every orbital to its own nearest copies, added by `on_mesh`."""

TAIL_RANGE = 0.35
"""Length over which the tail falls by e, in shortest lattice vectors."""

EIG_DECIMALS = 8
"""Energies are rounded to these, so that no processor's last bit shows in a file."""


def wigner_seitz(cell: FloatArray, mesh: Mesh) -> tuple[IntArray, IntArray]:
    """Lattice vectors no farther from the origin than from any supercell, and their degeneracies.

    Parameters
    ----------
    cell
        (3, 3) angstrom, rows.
    mesh
        k-points along each direction, 1 along one that is not periodic.

    Returns
    -------
    r_cells
        (n_r, 3), in lexicographic order.
    degeneracies
        (n_r,): how many supercells share each; the sum of their inverses is the mesh's size.
    """
    span = [range(-n, n + 1) if n > 1 else range(1) for n in mesh]
    cells = np.array(list(product(*span)), dtype=np.int64)
    reach = range(-SEARCHED_SUPERCELLS, SEARCHED_SUPERCELLS + 1)
    supercells = np.array(list(product(*[reach if n > 1 else range(1) for n in mesh]))) * mesh
    distances = np.linalg.norm((cells[:, None, :] - supercells[None, :, :]) @ cell, axis=2)
    nearest = distances.min(axis=1)
    ties = (distances < nearest[:, None] + TIE_ANGSTROM).sum(axis=1)
    inside = np.linalg.norm(cells @ cell, axis=1) < nearest + TIE_ANGSTROM
    return cells[inside], ties[inside]


def on_mesh(model: LatticeModel, mesh: Mesh) -> tuple[IntArray, IntArray, ComplexArray]:
    """R list, degeneracies and H(R) as a run on that mesh would write them.

    Raises
    ------
    ValueError
        A hopping of the model reaches beyond the inside of the Wigner-Seitz cell.
    """
    r_cells, degeneracies = wigner_seitz(model.crystal.cell, mesh)
    row_of = {tuple(r): row for row, r in enumerate(r_cells.tolist())}
    h_r = np.zeros((len(r_cells), model.n_orb, model.n_orb), dtype=complex)
    for r_cell, block in zip(model.r_cells.tolist(), model.h_r, strict=True):
        row = row_of.get(tuple(r_cell))
        if row is None or degeneracies[row] != 1:
            raise ValueError(f"the mesh {mesh} is too coarse for hopping to {r_cell}")
        h_r[row] = block
    tail = _tail(model, r_cells)
    h_r += tail[:, None, None] * np.eye(model.n_orb)
    return r_cells, degeneracies, h_r


def _tail(model: LatticeModel, r_cells: IntArray) -> FloatArray:
    """Hopping of every orbital to its copy in cell R, eV.

    A model of a paper stops after a few neighbours, which would look like a list that was cut.
    This fall-off moves all bands of a k by one amount: states, direct gaps and symmetries stay.
    """
    lengths = np.linalg.norm(r_cells @ model.crystal.cell, axis=1)
    shortest = lengths[lengths > 0].min()
    tail = TAIL_EV * np.exp(-(lengths - shortest) / (TAIL_RANGE * shortest))
    tail[lengths == 0] = 0.0
    return np.asarray(tail, dtype=np.float64)


def mesh_points(mesh: Mesh) -> FloatArray:
    """(n_k, 3) fractional k-points, the last component fastest, as Wannier90 wants them listed."""
    steps = np.array(list(product(*[range(n) for n in mesh])), dtype=np.float64)
    return steps / np.array(mesh, dtype=np.float64)


def energies_at(
    k_frac: FloatArray, r_cells: IntArray, degeneracies: IntArray, h_r: ComplexArray
) -> FloatArray:
    """(n_k, n_orb) eV, ascending; plain sum over R, nothing of the package's own H(k)."""
    phases = np.exp(2j * np.pi * (k_frac @ r_cells.T)) / degeneracies
    h_k = np.tensordot(phases, h_r, axes=1)
    energies = np.linalg.eigvalsh((h_k + h_k.conj().transpose(0, 2, 1)) / 2)
    return np.asarray(energies.round(EIG_DECIMALS) + 0.0)
