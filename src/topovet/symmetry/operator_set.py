"""A whole space group on the Wannier functions, built in a cell that has it exactly."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.linalg import sqrtm

from topovet.arrays import FloatArray, IntArray
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.symmetry.operators import (
    SITE_TOLERANCE_ANG,
    NotClosedError,
    WannierOperator,
    build_operator,
)


@dataclass(frozen=True, slots=True, eq=False)
class OperatorSet:
    """The operations that could be built, and why others could not.

    Attributes
    ----------
    operators
        In the order of the operations given.
    indices
        (n,) position of each operator among the operations given.
    reasons
        Position of an operation without operator -> the reason.
    """

    operators: tuple[WannierOperator, ...]
    indices: IntArray
    reasons: dict[int, str]


def build_operators(
    basis: OrbitalBasis,
    crystal: Crystal,
    rotations: IntArray,
    translations: FloatArray,
    *,
    site_tolerance_ang: float = SITE_TOLERANCE_ANG,
) -> OperatorSet:
    """Operators of a group of operations, whose products close to rounding.

    The cell is first given the exact symmetry of the rotations (`symmetric_cell`): matrices of
    one and the same group come out, however few digits the file has.

    Parameters
    ----------
    basis, crystal
        As for `build_operator`.
    rotations, translations
        (n, 3, 3) and (n, 3), a group modulo lattice translations.
    site_tolerance_ang
        How far the image of a site may be from a site.
    """
    exact = replace(crystal, cell=symmetric_cell(crystal.cell, rotations))
    operators, indices, reasons = [], [], {}
    for i, (rotation, translation) in enumerate(zip(rotations, translations, strict=True)):
        try:
            operators.append(
                build_operator(
                    basis, exact, rotation, translation, site_tolerance_ang=site_tolerance_ang
                )
            )
            indices.append(i)
        except NotClosedError as error:
            reasons[i] = str(error)
    return OperatorSet(tuple(operators), np.array(indices, dtype=np.int64), reasons)


def symmetric_cell(cell: FloatArray, rotations: IntArray) -> FloatArray:
    """The nearest cell whose lengths and angles all rotations keep.

    Its metric G = A A^T is the mean of W^T G W over the group, and the strain S that makes it,
    A' = A S, is symmetric: nothing turns.

    Parameters
    ----------
    cell
        (3, 3) angstrom, lattice vectors as rows, symmetric to the digits of a file.
    rotations
        (n, 3, 3) integer, a group.
    """
    rotations = np.asarray(rotations, dtype=float)
    metric = (rotations.transpose(0, 2, 1) @ (cell @ cell.T) @ rotations).mean(axis=0)
    inverse = np.linalg.inv(cell)
    return np.asarray(cell @ np.real(sqrtm(inverse @ metric @ inverse.T)))
