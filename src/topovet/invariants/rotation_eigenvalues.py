"""Eigenvalues of one operation in the occupied space, at k that it leaves where they are.

D(K)^n is a number c at such a k (minus one for a rotation of spinors, with the phase of the lattice
vector that n screws add up to), so the eigenvalues are the n roots of c. They are counted by
projectors onto each root, restricted to the occupied space, as irreps are.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.errors import NotInvariantError
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.irrep_names import (
    is_positive,
    operation_turns,
    rotation_axis,
    rotation_symbol,
)
from topovet.symmetry.little_group import (
    K_TOLERANCE,
    LittleGroup,
    find_little_group,
    list_operations,
)
from topovet.symmetry.operators import WannierOperator, cartesian_rotation, operator_at
from topovet.symmetry.special_points import SpecialPoint, find_special_points
from topovet.symmetry.textbook_names import operation_kinds

SCALAR_TOLERANCE = 1e-6
"""Largest |D^n - c|; D is unitary to rounding."""

MAX_ORDER = 24
"""Highest n looked for: six turns and four centring translations."""


@dataclass(frozen=True, slots=True)
class EigenvalueCount:
    """Occupied states by eigenvalue of one operation at one k.

    Attributes
    ----------
    k
        Fractional.
    angles_pi
        Angle of each possible eigenvalue in units of pi, in [0, 2), rising: exp(i pi angle).
    counts
        States with each of them.
    purity
        Smallest |2p - 1| over the eigenvalues p of the projectors in the occupied space; 1 for an
        exact symmetry.
    gap_ev
        E[N] - E[N-1] here.
    """

    k: tuple[float, float, float]
    angles_pi: tuple[float, ...]
    counts: tuple[int, ...]
    purity: float
    gap_ev: float

    def count_at(self, angle_pi: float) -> int:
        """States with the eigenvalue exp(i pi angle_pi); 0 if it is not one of the roots."""
        apart = np.abs((np.array(self.angles_pi) - angle_pi + 1) % 2 - 1)
        return self.counts[int(apart.argmin())] if apart.min() < 1e-6 else 0


@dataclass(frozen=True, slots=True)
class RotationContent:
    """A rotation, screw, rotoinversion, mirror or glide at a special point.

    Attributes
    ----------
    point
        Name of the special point.
    symbol
        "C2", "C3", "C4", "C6", "S3", "S4", "S6" or "m".
    axis_cart
        Unit vector about which the proper part turns counter-clockwise by 360/n degrees.
    translation
        w of the operation, fractional.
    eigenvalues
        The occupied states.
    """

    point: str
    symbol: str
    axis_cart: tuple[float, float, float]
    translation: tuple[float, float, float]
    eigenvalues: EigenvalueCount


def count_eigenvalues(
    h: ComplexArray, d: ComplexArray, k_frac: FloatArray, filling: int
) -> EigenvalueCount:
    """Eigenvalues of D among the lowest bands of H.

    Parameters
    ----------
    h, d
        (n_orb, n_orb) H(K) in eV and D(K), at a K with gK = K + G.
    k_frac
        (3,) K, for the record.
    filling
        Occupied bands, 0 < filling < n_orb.

    Raises
    ------
    NotInvariantError
        No power of D is a number: the operation does not fix K.
    """
    energies, states = np.linalg.eigh(h)
    order, scalar = _order(d)
    roots = np.exp(1j * (np.angle(scalar) + 2 * np.pi * np.arange(order)) / order)
    powers = np.array([np.linalg.matrix_power(d, m) for m in range(order)])
    weights = roots[:, None] ** -np.arange(order)[None, :] / order
    projectors = np.tensordot(weights, powers, axes=1)
    occupied = states[:, :filling]
    inside = np.linalg.eigvalsh(occupied.conj().T @ projectors @ occupied)
    angles = np.round(np.angle(roots) / np.pi % 2.0, 9) % 2.0
    rising = np.argsort(angles)
    x, y, z = (float(c) for c in k_frac)
    return EigenvalueCount(
        k=(x, y, z),
        angles_pi=tuple(angles[rising].tolist()),
        counts=tuple((inside > 0.5).sum(axis=1)[rising].tolist()),
        purity=min(1.0, float(np.abs(2 * inside - 1).min())),
        gap_ev=float(energies[filling] - energies[filling - 1]),
    )


def _order(d: ComplexArray) -> tuple[int, complex]:
    """Least n with D^n = c, and c."""
    power = np.eye(len(d), dtype=np.complex128)
    for n in range(1, MAX_ORDER + 1):
        power = power @ d
        scalar = complex(np.trace(power)) / len(d)
        if np.abs(power - scalar * np.eye(len(d))).max() < SCALAR_TOLERANCE:
            return n, scalar / abs(scalar)
    raise NotInvariantError("an operation was asked for its eigenvalues at a k that it moves")


def has_both_sides(operators: Sequence[WannierOperator], filling: int) -> bool:
    """Whether the model has occupied and empty bands; also false without operators."""
    return bool(operators) and 0 < filling < len(operators[0].matrix)


def compute_rotation_contents(
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    crystal: Crystal,
    filling: int,
    *,
    spinful: bool,
) -> tuple[RotationContent, ...]:
    """Eigenvalues of every kind of rotation in the occupied space at every special point.

    For each axis the rotation of highest order, and the rotoinversion or mirror of highest order
    where there is no inversion; operations that symmetry makes equivalent appear once.

    Parameters
    ----------
    bloch, operators, crystal, spinful
        As for `topovet.invariants.band_irreps.compute_band_irreps`.
    filling
        Occupied bands, spin counted.

    Returns
    -------
    tuple of RotationContent
        By point, highest order first; empty where the model has no occupied or no empty bands.
    """
    if not has_both_sides(operators, filling):
        return ()
    operations = list_operations(operators, crystal.cell, spinful=spinful)
    found: list[RotationContent] = []
    with one_blas_thread():
        for point in find_special_points(crystal, operations):
            group = find_little_group(operations, point.k_frac)
            found += _contents_at(bloch, operators, crystal, filling, point, group)
    return tuple(found)


def _contents_at(
    bloch: BlochSum,
    operators: Sequence[WannierOperator],
    crystal: Crystal,
    filling: int,
    point: SpecialPoint,
    group: LittleGroup,
) -> list[RotationContent]:
    k = point.k_frac[None]
    h = bloch.at(k)[0]
    found: dict[tuple[object, ...], RotationContent] = {}
    for member in main_members(group):
        operator = operators[int(group.members[member])]
        counted = count_eigenvalues(h, operator_at(operator, k)[0], point.k_frac, filling)
        content = _content(point.name, operator, crystal, counted)
        found.setdefault((content.symbol, counted.angles_pi, counted.counts), content)
    return list(found.values())


def main_members(group: LittleGroup) -> list[int]:
    """Members of highest order on each axis, proper and improper, in the positive sense."""
    kinds = operation_kinds(group.rotations)
    with_inversion = "-1" in kinds
    best: dict[tuple[bool, tuple[float, ...]], tuple[int, int]] = {}
    for member, (kind, cartesian) in enumerate(zip(kinds, group.cartesian, strict=True)):
        proper = kind in "2346"
        axis = rotation_axis(cartesian)
        if kind in ("1", "-1") or (with_inversion and not proper) or not is_positive(axis):
            continue
        place = (proper, tuple((np.round(axis, 3) + 0.0).tolist()))
        turns = operation_turns(kind)
        if place not in best or turns > best[place][0]:
            best[place] = (turns, member)
    return [member for _, member in sorted(best.values(), key=lambda v: (-v[0], v[1]))]


def _content(
    point: str, operator: WannierOperator, crystal: Crystal, counted: EigenvalueCount
) -> RotationContent:
    x, y, z = rotation_axis(cartesian_rotation(operator.rotation, crystal.cell)).tolist()
    t_1, t_2, t_3 = (float(t) for t in operator.translation)
    symbol = rotation_symbol(operator.rotation)
    return RotationContent(point, symbol, (x, y, z), (t_1, t_2, t_3), counted)


def fixed_momenta(operator: WannierOperator) -> FloatArray:
    """(n, 3) isolated k in [0, 1) that an operation maps to themselves modulo a reciprocal vector.

    Solutions of k (V - 1) = G with V = `k_rotation`: |det(V - 1)| of them, TRIM first.

    Raises
    ------
    NotInvariantError
        The operation fixes a line or a plane (every proper rotation and mirror does).
    """
    change = operator.k_rotation - np.eye(3, dtype=np.int64)
    n = round(abs(float(np.linalg.det(change))))
    if n == 0:
        raise NotInvariantError("the operation fixes lines or planes of k, not points")
    mesh = np.stack(np.meshgrid(*[np.arange(n) / n] * 3, indexing="ij"), axis=-1).reshape(-1, 3)
    moved = mesh @ change
    fixed = mesh[np.abs(moved - np.round(moved)).max(axis=1) < K_TOLERANCE]
    doubled = np.abs(2 * fixed - np.round(2 * fixed)).max(axis=1) < K_TOLERANCE
    return np.asarray(fixed[np.argsort(~doubled, kind="stable")])
