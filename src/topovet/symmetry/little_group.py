"""Little groups: the operations that leave a k where it is, and how they multiply there.

An operation g = {W|w} takes a row k to k' = k W^-1, one with time reversal to -k W^-1. The little
group of k holds those with k' = k + G. Their matrices D_g(k) on Bloch states multiply as

    D_a(k) D_b(k) = omega(a, b) D_ab(k),      omega(a, b) = s exp(-2 pi i k.t),

where g_a g_b = {1|t} g_ab with t a lattice vector and s = +-1 the sign with which the SU(2)
matrices of the fixed choice multiply (1 without spin). Everything here follows from the operations
and the cell; no Wannier functions enter.

References
----------
Bradley, Cracknell, The Mathematical Theory of Symmetry in Solids (Oxford, 1972), chapter 3.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray, frozen
from topovet.errors import UndefinedError
from topovet.symmetry.operations import TRANSLATION_TOLERANCE
from topovet.symmetry.operators import WannierOperator, cartesian_rotation, spin_rotation

K_TOLERANCE = 1e-6
"""Fractional distance within which an image of k counts as k; special points are exact ratios or
come from cell parameters in double precision."""


class NotAGroupError(UndefinedError):
    """Operations that are not closed under multiplication modulo lattice translations."""


@dataclass(frozen=True, slots=True, eq=False)
class OperationList:
    """Space-group operations of one cell, as a group modulo its lattice translations.

    Attributes
    ----------
    cell
        (3, 3) angstrom, lattice vectors as rows.
    rotations, translations
        (n_op, 3, 3) integer and (n_op, 3) fractional, x' = W x + w.
    antiunitary
        (n_op,) whether time reversal is part of the operation.
    spinful
        Whether the states carry spin: double-valued representations.
    """

    cell: FloatArray
    rotations: IntArray
    translations: FloatArray
    antiunitary: BoolArray
    spinful: bool

    def __post_init__(self) -> None:
        for name in ("cell", "rotations", "translations", "antiunitary"):
            object.__setattr__(self, name, frozen(np.asarray(getattr(self, name))))


@dataclass(frozen=True, slots=True, eq=False)
class LittleGroup:
    """The little group of one k, modulo lattice translations.

    Attributes
    ----------
    operations
        All operations it was taken from.
    k_frac
        (3,) fractional, as given.
    members
        (n,) indices of the unitary operations that fix k.
    reversing
        (n_anti,) indices of the antiunitary ones.
    star
        (n_star, 3) distinct images of k under all operations, modulo 1 in (-1/2, 1/2]; k itself
        comes first.
    product, factors
        (n, n) position c of the product of members a and b, and omega(a, b).
    squares, square_factors
        (n_anti,) position of the square of each reversing operation and the factor before it,
        Theta^2 = -1 of spinors included.
    conjugate, conjugate_factors
        (n,) a^-1 h a = factor times member for each member h, a being the first reversing
        operation. Empty without one.
    """

    operations: OperationList
    k_frac: FloatArray
    members: IntArray
    reversing: IntArray
    star: FloatArray
    product: IntArray
    factors: ComplexArray
    squares: IntArray
    square_factors: ComplexArray
    conjugate: IntArray
    conjugate_factors: ComplexArray

    @property
    def rotations(self) -> IntArray:
        """(n, 3, 3) W of the members."""
        return np.asarray(self.operations.rotations[self.members])

    @property
    def translations(self) -> FloatArray:
        """(n, 3) w of the members."""
        return np.asarray(self.operations.translations[self.members])

    @property
    def cartesian(self) -> FloatArray:
        """(n, 3, 3) orthogonal matrices of the members."""
        return np.array([cartesian_rotation(w, self.operations.cell) for w in self.rotations])


def list_operations(
    operators: Sequence[WannierOperator], cell: FloatArray, *, spinful: bool
) -> OperationList:
    """The operations behind operators on Wannier functions, in the same order."""
    return OperationList(
        cell=cell,
        rotations=np.array([o.rotation for o in operators]).reshape(-1, 3, 3),
        translations=np.array([o.translation for o in operators]).reshape(-1, 3),
        antiunitary=np.array([o.antiunitary for o in operators], dtype=bool),
        spinful=spinful,
    )


def find_little_group(operations: OperationList, k_frac: FloatArray) -> LittleGroup:
    """The operations that fix a k, with their factor system there.

    Parameters
    ----------
    operations
        A group modulo lattice translations; the unitary ones form a subgroup of it.
    k_frac
        (3,) fractional; k + G gives the same group, factors and representations.

    Raises
    ------
    NotAGroupError
        A product of two operations of the little group is not among the operations.
    """
    k = np.asarray(k_frac, dtype=float)
    images = k @ k_rotations(operations)
    shifts = images - k
    fixes = np.abs(shifts - np.round(shifts)).max(axis=1) < K_TOLERANCE
    members = np.flatnonzero(fixes & ~operations.antiunitary)
    reversing = np.flatnonzero(fixes & operations.antiunitary)
    table = _Multiplication(operations, members, k)
    product, factors = table.products(members, members)
    squares, square_factors = table.products(reversing, reversing, pairwise=False)
    conjugate, conjugate_factors = table.conjugation(reversing[:1])
    sign = -1.0 if operations.spinful else 1.0
    return LittleGroup(
        operations=operations,
        k_frac=frozen(k),
        members=members,
        reversing=reversing,
        star=star_of(operations, k),
        product=product,
        factors=factors,
        squares=squares,
        square_factors=sign * square_factors,
        conjugate=conjugate,
        conjugate_factors=conjugate_factors,
    )


def k_rotations(operations: OperationList) -> IntArray:
    """(n_op, 3, 3) integers V with k' = k @ V for a row k."""
    inverse = np.round(np.linalg.inv(operations.rotations.astype(float))).astype(np.int64)
    return np.where(operations.antiunitary[:, None, None], -inverse, inverse)


def star_of(operations: OperationList, k_frac: FloatArray) -> FloatArray:
    """(n_star, 3) distinct images of k modulo 1 under all operations, k itself first."""
    k = np.asarray(k_frac, dtype=float)
    images = np.concatenate([k[None], k @ k_rotations(operations)])
    folded = np.round(images - np.ceil(images - 0.5 - K_TOLERANCE), 9)  # into (-1/2, 1/2]
    arms: list[FloatArray] = []
    for image in folded:
        if not any(same_point(image, arm) for arm in arms):
            arms.append(image)
    return np.array(arms) + 0.0  # no negative zeros


def same_point(k_a: FloatArray, k_b: FloatArray) -> bool:
    """Whether two k differ by a reciprocal lattice vector."""
    difference = np.asarray(k_a) - np.asarray(k_b)
    return bool(np.abs(difference - np.round(difference)).max() < K_TOLERANCE)


class _Multiplication:
    """Products of operations, looked up among the unitary members of a little group.

    Antiunitary operations enter through their space part: time reversal commutes with it, and
    the caller accounts for Theta^2.
    """

    def __init__(self, operations: OperationList, members: IntArray, k: FloatArray) -> None:
        self._operations, self._k = operations, k
        self._members = members
        self._spins = np.array(
            [spin_rotation(cartesian_rotation(w, operations.cell)) for w in operations.rotations]
        ).reshape(-1, 2, 2)

    def products(
        self, first: IntArray, second: IntArray, *, pairwise: bool = True
    ) -> tuple[IntArray, ComplexArray]:
        """Position of g_a g_b and its factor, for all pairs or for aligned ones."""
        if pairwise:
            first, second = first[:, None], second[None, :]
        c, cells, signs = self._product(first, second, self._members)
        return c, np.asarray(signs * np.exp(-2j * np.pi * (cells @ self._k)))

    def conjugation(self, reversing: IntArray) -> tuple[IntArray, ComplexArray]:
        """Position x and factor of g^-1 h g for each member h, g the space part of one a.

        From h g = s {1|t} c and g x = s' {1|t'} c: g^-1 h g = s s' {1|W^-1 (t - t')} x, and a
        translation W^-1 t has the phase exp(-2 pi i (k W^-1).t) with k W^-1 = -k modulo G.
        """
        if not len(reversing):
            return np.zeros(0, dtype=np.int64), np.zeros(0, dtype=np.complex128)
        among = np.flatnonzero(self._operations.antiunitary)
        h_g, cells_h, signs_h = self._product(self._members, reversing, among)
        g_x, cells_x, signs_x = self._product(reversing, self._members, among)
        position = np.array([int(np.flatnonzero(g_x == c)[0]) for c in h_g], dtype=np.int64)
        phase = np.exp(2j * np.pi * ((cells_h - cells_x[position]) @ self._k))
        return position, np.asarray(signs_h * signs_x[position] * phase)

    def _product(
        self, first: IntArray, second: IntArray, among: IntArray
    ) -> tuple[IntArray, FloatArray, FloatArray]:
        """Position in `among` of the space part of g_a g_b, lattice vector and sign left over."""
        w, t = self._operations.rotations, self._operations.translations
        rotation = w[first] @ w[second]
        translation = np.einsum("...ij,...j->...i", w[first], t[second]) + t[first]
        same = np.all(rotation[..., None, :, :] == w[among], axis=(-2, -1))
        rest = translation[..., None, :] - t[among]
        cells = np.round(rest)
        same &= np.abs(rest - cells).max(axis=-1) < TRANSLATION_TOLERANCE
        if not same.any(axis=-1).all():
            raise NotAGroupError("the operations are not closed under multiplication")
        found = same.argmax(axis=-1)
        cell = np.take_along_axis(cells, found[..., None, None], axis=-2)[..., 0, :]
        if not self._operations.spinful:
            return found, cell, np.ones(found.shape)
        made = self._spins[first] @ self._spins[second]
        overlap = np.einsum("...ij,...ij->...", self._spins[among[found]].conj(), made)
        return found, cell, np.sign(overlap.real)
