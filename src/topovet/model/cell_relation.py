"""How two cells are related: one lattice told differently, a supercell, or nothing in common.

A structure file is often in another cell than the Hamiltonian: conventional instead of primitive,
another choice of axes, another orientation. All of them are

    larger cell = matrix @ smaller cell @ rotation         (lattice vectors are rows)

with an integer matrix, found from the metric alone so that the orientation does not matter.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray, IntArray, frozen
from topovet.model.nearest_image import nearest_images, reduce_cell

CELL_TOLERANCE_ANG = 0.01
"""Lattice vectors that agree this well are the same; files carry few digits."""

ATOM_TOLERANCE_ANG = 0.05
"""Atoms of a larger cell nearer than this, modulo the smaller lattice, are one."""

MAX_MULTIPLE = 64
"""Largest supercell that is looked for."""


@dataclass(frozen=True, slots=True, eq=False)
class CellRelation:
    """Relation of a cell to another.

    Attributes
    ----------
    kind
        "identical", "rotated" (same vectors in another orientation), "unimodular" (same lattice,
        other vectors), "supercell" or "unrelated".
    larger
        "first" or "second" cell, for a supercell; "" otherwise.
    multiple
        Volume of the larger over the smaller; 0 when unrelated.
    matrix
        (3, 3) integers: larger = matrix @ smaller @ rotation, first = matrix @ second @ rotation
        where the volumes are equal; None when unrelated.
    rotation
        (3, 3) orthogonal, acts on Cartesian rows from the right; improper only if no proper one
        fits; None when unrelated.
    misfit_ang
        Largest distance of a lattice vector from what the relation says; None when unrelated.
    """

    kind: str
    larger: str
    multiple: int
    matrix: IntArray | None
    rotation: FloatArray | None
    misfit_ang: float | None

    def __post_init__(self) -> None:
        if self.matrix is not None:
            object.__setattr__(self, "matrix", frozen(self.matrix))
        if self.rotation is not None:
            object.__setattr__(self, "rotation", frozen(self.rotation))

    @property
    def turned(self) -> bool:
        """Whether the two differ in orientation as well."""
        return self.rotation is not None and not np.allclose(self.rotation, np.eye(3), atol=1e-3)


def relate_cells(
    first: FloatArray, second: FloatArray, *, tolerance_ang: float = CELL_TOLERANCE_ANG
) -> CellRelation:
    """Relation of two cells, (3, 3) angstrom each.

    Where the symmetry of the lattice allows several matrices, the one without a rotation is taken,
    then proper rotations, then small entries.

    Parameters
    ----------
    first, second
        Lattice vectors as rows.
    tolerance_ang
        How far a lattice vector may be off.
    """
    a, b = np.asarray(first, dtype=float), np.asarray(second, dtype=float)
    volume_a, volume_b = abs(np.linalg.det(a)), abs(np.linalg.det(b))
    if min(volume_a, volume_b) < 1e-9:
        return _UNRELATED
    large, small = (a, b) if volume_a >= volume_b * (1 - 1e-9) else (b, a)
    multiple = round(max(volume_a, volume_b) / min(volume_a, volume_b))
    if multiple > MAX_MULTIPLE:
        return _UNRELATED
    if multiple == 1:
        large, small = a, b
    best: CellRelation | None = None
    for matrix in _candidates(large, small, multiple, tolerance_ang):
        rotation, misfit = _fit_rotation(large, matrix @ small)
        if misfit <= tolerance_ang:
            found = _describe(a is large, multiple, matrix, rotation, misfit)
            if best is None or _preference(found) < _preference(best):
                best = found
    return best or _UNRELATED


def atoms_in_cell(
    symbols: tuple[str, ...],
    positions_frac: FloatArray,
    cell: FloatArray,
    other: FloatArray,
    relation: CellRelation,
) -> tuple[tuple[str, ...], FloatArray] | None:
    """Atoms of one cell told in another that holds as many or fewer of them.

    Parameters
    ----------
    symbols, positions_frac, cell
        Elements, (n, 3) fractional and (3, 3) angstrom.
    other
        (3, 3) the cell that is asked for.
    relation
        relate_cells(cell, other).

    Returns
    -------
    tuple or None
        Elements and fractional positions in [0, 1); None where the cells are unrelated, `other` is
        the larger, or the atoms do not repeat with its lattice.
    """
    if relation.rotation is None or relation.larger == "second":
        return None
    at = (positions_frac @ cell) @ relation.rotation.T @ np.linalg.inv(other)
    kept: list[int] = []
    images = np.zeros(0, dtype=np.int64)
    for n in range(len(at)):
        distance = nearest_images(at[kept] - at[n], other)[1] if kept else np.zeros(0)
        alike = [symbols[i] == symbols[n] for i in kept]
        same = np.flatnonzero((distance < ATOM_TOLERANCE_ANG) & np.array(alike, dtype=bool))
        if len(same):
            images[same[0]] += 1
            continue
        kept.append(n)
        images = np.append(images, 1)
    if len(kept) * relation.multiple != len(at) or (images != relation.multiple).any():
        return None
    return tuple(symbols[n] for n in kept), np.asarray(at[kept] % 1.0)


_UNRELATED = CellRelation("unrelated", "", 0, None, None, None)


def _describe(
    first_is_larger: bool, multiple: int, matrix: IntArray, rotation: FloatArray, misfit: float
) -> CellRelation:
    turned = not np.allclose(rotation, np.eye(3), atol=1e-3)
    if multiple > 1:
        larger = "first" if first_is_larger else "second"
        return CellRelation("supercell", larger, multiple, matrix, rotation, misfit)
    if np.array_equal(matrix, np.eye(3)):
        kind = "rotated" if turned else "identical"
    else:
        kind = "unimodular"
    return CellRelation(kind, "", 1, matrix, rotation, misfit)


def _preference(relation: CellRelation) -> tuple[bool, bool, bool, int, int]:
    assert relation.matrix is not None
    assert relation.rotation is not None
    return (
        float(np.linalg.det(relation.rotation)) < 0,
        relation.kind not in ("identical", "rotated"),
        relation.turned,
        int(np.abs(relation.matrix).sum()),
        -int(np.trace(relation.matrix)),
    )


def _fit_rotation(target: FloatArray, vectors: FloatArray) -> tuple[FloatArray, float]:
    """Orthogonal matrix that turns the rows nearest to the target's, and what is left (angstrom).

    Orthogonal Procrustes problem: Golub and Van Loan, Matrix Computations (4th ed., 2013), 6.4.1.
    """
    unturned = float(np.linalg.norm(vectors - target, axis=1).max())
    left, _, right = np.linalg.svd(vectors.T @ target)
    rotation = left @ right
    misfit = float(np.linalg.norm(vectors @ rotation - target, axis=1).max())
    if np.allclose(rotation, np.eye(3), atol=1e-3):
        return np.eye(3), min(unturned, misfit)
    return rotation, misfit


def _candidates(
    large: FloatArray, small: FloatArray, multiple: int, tolerance: float
) -> list[IntArray]:
    """Integer matrices whose rows, applied to the small cell, have the large cell's metric."""
    reduced, turn = reduce_cell(small)
    lengths = np.linalg.norm(large, axis=1)
    reach = np.floor((lengths.max() + tolerance) * np.linalg.norm(np.linalg.inv(reduced), axis=0))
    steps = [np.arange(-int(n), int(n) + 1) for n in reach]
    grid = np.array(np.meshgrid(*steps, indexing="ij"), dtype=np.int64).reshape(3, -1).T
    vectors = grid @ reduced
    norms = np.linalg.norm(vectors, axis=1)
    rows = [np.flatnonzero(np.abs(norms - length) <= 2 * tolerance) for length in lengths]
    metric = large @ large.T
    slack = 2 * tolerance * (lengths[:, None] + lengths[None, :])
    fits = {
        (i, j): np.abs(vectors[rows[i]] @ vectors[rows[j]].T - metric[i, j]) <= slack[i, j]
        for i, j in ((0, 1), (0, 2), (1, 2))
    }
    found = []
    for x, y in np.argwhere(fits[0, 1]):
        for z in np.flatnonzero(fits[0, 2][x] & fits[1, 2][y]):
            matrix = grid[[rows[0][x], rows[1][y], rows[2][z]]]
            if abs(round(np.linalg.det(matrix))) == multiple:
                found.append(matrix @ turn)
    return found
