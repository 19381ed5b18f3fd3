"""A space group with spin as one table: operation, lattice translation, sign.

Elements {1|t}(+-1) g_i are written (i, t, +-): g_i g_j = s_ij {1|t_ij} g_c(i,j), with t_ij integer
and s_ij = +-1 from the one choice of SU(2) matrices. Everything else, little groups, site-symmetry
groups and induced representations, is looked up here, so that no sign is derived twice.

Translations of a structure file have few digits and an arbitrary origin. The integers t_ij alone
fix them: summing W_i w_j + w_i = w_c + t_ij over the n operations j gives

    w_i = (1/n) sum_j t_ij + (1 - W_i) c,      c = (1/n) sum_j w_j,

so that about the origin c all translations are whole multiples of 1/n.

References
----------
Bradley, Cracknell, The Mathematical Theory of Symmetry in Solids (Oxford, 1972), chapters 3 and 6.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray, frozen
from topovet.symmetry.little_group import LittleGroup, NotAGroupError, OperationList
from topovet.symmetry.operations import multiplication_table
from topovet.symmetry.operator_set import symmetric_cell
from topovet.symmetry.operators import cartesian_rotation, spin_rotation


@dataclass(frozen=True, slots=True, eq=False)
class DoubleGroup:
    """The unitary operations modulo lattice translations, with or without time reversal.

    Attributes
    ----------
    operations
        The n unitary operations, then with time reversal their n products with it.
    numerators
        (n, 3) integers, n times the translations about `origin`.
    origin
        (3,) fractional, c of the module.
    product, cells, signs
        (n, n), (n, n, 3) and (n, n) integers c, t and s of g_i g_j = s {1|t} g_c.
    inverse_product
        (n, n) position j with g_i g_j = g_c up to translation, at [i, c].
    spinful, time_reversal
        Double-valued representations; whether Theta is in the group.
    """

    operations: OperationList
    numerators: IntArray
    origin: FloatArray
    product: IntArray
    cells: IntArray
    signs: IntArray
    inverse_product: IntArray
    spinful: bool
    time_reversal: bool

    @property
    def n(self) -> int:
        """Number of unitary operations."""
        return len(self.product)

    @property
    def rotations(self) -> IntArray:
        """(n, 3, 3) W of the unitary operations."""
        return np.asarray(self.operations.rotations[: self.n])

    @property
    def translations(self) -> FloatArray:
        """(n, 3) exact translations about `origin`."""
        return np.asarray(self.numerators / self.n)

    @property
    def k_actions(self) -> IntArray:
        """(n or 2n, 3, 3) integers that take a column k to its image, time reversal included."""
        inverse = np.round(np.linalg.inv(self.rotations.astype(float))).astype(np.int64)
        actions = inverse.transpose(0, 2, 1)
        return np.concatenate([actions, -actions]) if self.time_reversal else actions


def build_double_group(
    cell: FloatArray,
    rotations: IntArray,
    translations: FloatArray,
    *,
    spinful: bool,
    time_reversal: bool = True,
) -> DoubleGroup:
    """The table of a space group in a given cell, primitive or not.

    Parameters
    ----------
    cell
        (3, 3) angstrom, lattice vectors as rows; it is first given the symmetry of the rotations.
    rotations, translations
        (n, 3, 3) integer and (n, 3) fractional, x' = W x + w: a group modulo lattice translations.

    Raises
    ------
    NotAGroupError
        The operations are not closed under multiplication.
    """
    rotations, n = np.asarray(rotations, dtype=np.int64), len(rotations)
    product, cells = multiplication_table(rotations, translations, np.zeros(n, dtype=bool))
    if (product < 0).any() or (np.sort(product, axis=1) != np.arange(n)).any():
        raise NotAGroupError("the operations are not closed under multiplication")
    exact = symmetric_cell(cell, rotations)
    copies = 2 if time_reversal else 1
    operations = OperationList(
        cell=exact,
        rotations=np.concatenate([rotations] * copies),
        translations=np.concatenate([np.asarray(translations, dtype=float)] * copies),
        antiunitary=np.repeat([False, True][:copies], n),
        spinful=spinful,
    )
    return DoubleGroup(
        operations=operations,
        numerators=frozen(cells.sum(axis=1)),
        origin=frozen(np.asarray(translations, dtype=float).mean(axis=0)),
        product=frozen(product),
        cells=frozen(cells),
        signs=frozen(_signs(rotations, exact, product, spinful)),
        inverse_product=frozen(np.argsort(product, axis=1)),
        spinful=spinful,
        time_reversal=time_reversal,
    )


def _signs(rotations: IntArray, cell: FloatArray, product: IntArray, spinful: bool) -> IntArray:
    """(n, n) sign with which the SU(2) matrices multiply."""
    if not spinful:
        return np.ones_like(product)
    spins = np.array([spin_rotation(cartesian_rotation(w, cell)) for w in rotations])
    made = np.einsum("aij,bjk->abik", spins, spins)
    overlap = np.einsum("abik,abik->ab", spins[product].conj(), made).real
    return np.asarray(np.sign(overlap), dtype=np.int64)


def little_group_at(group: DoubleGroup, k_frac: FloatArray, fixing: IntArray) -> LittleGroup:
    """Little group of a k, as `find_little_group` gives it, without its star.

    Parameters
    ----------
    k_frac
        (3,) fractional.
    fixing
        Positions in `group.operations` of the operations that fix k modulo reciprocal lattice.
    """
    k = np.asarray(k_frac, dtype=float)
    members = np.asarray(fixing[fixing < group.n])
    return _subgroup(group, members, np.asarray(fixing[fixing >= group.n]) - group.n, k)


def site_group_of(group: DoubleGroup, fixing: IntArray) -> LittleGroup:
    """Site-symmetry group, whose operations are {W|w + t} with the t that fixes the site.

    It is a finite group: lattice translations drop out, which a little group has at k = 0.

    Parameters
    ----------
    fixing
        Positions of the unitary operations that fix the site modulo lattice translations.
    """
    reversing = fixing if group.time_reversal else fixing[:0]
    return _subgroup(group, fixing, reversing, np.zeros(3))


def _subgroup(
    group: DoubleGroup, members: IntArray, spatial: IntArray, k: FloatArray
) -> LittleGroup:
    """The members, and the reversing operations given by their space parts, multiplied at k."""
    position = np.full(group.n, -1, dtype=np.int64)
    position[members] = np.arange(len(members))
    block = np.ix_(members, members)
    square_sign = -1.0 if group.spinful else 1.0
    conjugate, conjugate_factors = _conjugation(group, members, spatial, position, k)
    return LittleGroup(
        operations=group.operations,
        k_frac=frozen(k),
        members=members,
        reversing=spatial + group.n,
        star=frozen(k[None]),
        product=position[group.product[block]],
        factors=_factor(group.signs[block], group.cells[block], k),
        squares=position[group.product[spatial, spatial]],
        square_factors=square_sign
        * _factor(group.signs[spatial, spatial], group.cells[spatial, spatial], k),
        conjugate=conjugate,
        conjugate_factors=conjugate_factors,
    )


def _factor(signs: IntArray, cells: IntArray, k: FloatArray) -> ComplexArray:
    """omega = s exp(-2 pi i k.t)."""
    return np.asarray(signs * np.exp(-2j * np.pi * (cells @ k)))


def _conjugation(
    group: DoubleGroup, members: IntArray, spatial: IntArray, position: IntArray, k: FloatArray
) -> tuple[IntArray, ComplexArray]:
    """a^-1 h a of each member h, a = r Theta the first reversing operation.

    h r = s {1|t} c and r x = s' {1|t'} c give r^-1 h r = s s' {1|W^-1 (t - t')} x, and r takes k
    to -k, so that the translation has the phase exp(+2 pi i k.(t - t')).
    """
    if not len(spatial):
        return np.zeros(0, dtype=np.int64), np.zeros(0, dtype=np.complex128)
    r = spatial[0]
    x = group.inverse_product[r, group.product[members, r]]
    cells = group.cells[members, r] - group.cells[r, x]
    signs = group.signs[members, r] * group.signs[r, x]
    return position[x], np.asarray(signs * np.exp(2j * np.pi * (cells @ k)))
