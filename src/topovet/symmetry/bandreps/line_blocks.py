"""H(k) along a line of symmetry as blocks, one for each irrep of the line's group.

Along a line k(s) = k_0 + s d the operations that fix it, k W^-1 = k + G with one G each, have in
the periodic gauge

    D_g(k) = exp(-2 pi i s d.w_g) T(s) D_g(k_0) T(s)†,   T(s) = diag exp(2 pi i s y_m),
    y_m = y_n + d.(w_g - L_n + C_m)    wherever D_g has an element m, n,

so that T† H T commutes with the matrices at k_0 and one basis, sorted by irreps there, does for all
of the line. The y are found by averaging the right-hand side over the group, starting from 0: the
rule for g and then h is that for hg, and an average over a group is a fixed point.

Levels of different irreps lie in different blocks and may cross; those of one block do not
(von Neumann, Wigner), so that the n-th of an irrep at one end runs into its n-th at the other.

References
----------
von Neumann, Wigner, Phys. Z. 30, 467 (1929). Bouckaert, Smoluchowski, Wigner, Phys. Rev. 50, 58
(1936), doi:10.1103/PhysRev.50.58.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray, frozen
from topovet.errors import TopovetError
from topovet.model.fourier import BlochSum
from topovet.symmetry.bandreps.corepresentations import CorepTable, find_coreps
from topovet.symmetry.bandreps.double_group import DoubleGroup, little_group_at
from topovet.symmetry.operators import WannierOperator, operator_at

LINE_TOLERANCE = 1e-4
"""How far an operation may move a k of a line, fractional: special points whose coordinates depend
on the cell's lengths are only as exact as these."""


CLOSED = 1e-4
"""Largest |Q†Q - 1| of the sorted basis Q; declared orbitals close to better than that."""


class LineError(TopovetError):
    """Operators that do not make representations of the line's group."""


@dataclass(frozen=True, slots=True, eq=False)
class SymmetryLine:
    """A straight line of k with the operations that fix all of it.

    Attributes
    ----------
    k_start, k_end
        (3,) fractional.
    table
        Corepresentations of its group in the middle.
    """

    k_start: FloatArray
    k_end: FloatArray
    table: CorepTable

    def at(self, s: FloatArray) -> FloatArray:
        """(n, 3) k at shares s of the way."""
        return np.asarray(self.k_start + np.asarray(s)[:, None] * (self.k_end - self.k_start))


@dataclass(frozen=True, slots=True, eq=False)
class LineBlocks:
    """A line with a basis sorted by its irreps.

    Attributes
    ----------
    line
        The line.
    turns
        (n_orb,) y: T(s) = diag exp(2 pi i (s - 1/2) y).
    rows
        For each irrep (d, n_orb, m) orthonormal states of each of its d rows, m its multiplicity.
    """

    line: SymmetryLine
    turns: FloatArray
    rows: tuple[ComplexArray, ...]

    @property
    def n_levels(self) -> tuple[int, ...]:
        """Levels of each corepresentation; 0 for one that does not occur."""
        coreps = self.line.table.coreps
        return tuple(self.rows[c.irreps[0]].shape[2] // c.weight for c in coreps)

    def _turned(self, bloch: BlochSum, s: FloatArray) -> ComplexArray:
        """(n_k, n_orb, n_orb) T† H T."""
        t = np.exp(2j * np.pi * (np.asarray(s)[:, None] - 0.5) * self.turns)
        return np.asarray(t.conj()[:, :, None] * bloch.at(self.line.at(s)) * t[:, None, :])

    def energies(self, bloch: BlochSum, s: FloatArray) -> tuple[FloatArray, ...]:
        """For each corepresentation (n_k, n_level) eV, rising; one energy for a level.

        Parameters
        ----------
        s
            (n_k,) shares of the way.
        """
        h = self._turned(bloch, s)
        found = []
        for corep, n in zip(self.line.table.coreps, self.n_levels, strict=True):
            states = self.rows[corep.irreps[0]][0]
            values = np.linalg.eigvalsh(states.conj().T @ h @ states)
            found.append(values.reshape(len(h), n, corep.weight).mean(axis=2))
        return tuple(found)

    def residual_ev(self, bloch: BlochSum, s: FloatArray) -> float:
        """Bound on what of H is outside the blocks, or differs between the rows of an irrep.

        The largest row sum bounds the spectral norm. Time reversal is not asked.
        """
        h = self._turned(bloch, s)
        basis = np.concatenate([np.concatenate(list(r), axis=1) for r in self.rows], axis=1)
        rest = basis.conj().T @ h @ basis
        first = 0
        for rows in self.rows:
            d, m = len(rows), rows.shape[2]
            places = [slice(first + i * m, first + (i + 1) * m) for i in range(d)]
            if m:
                block = np.mean([rest[:, p, p] for p in places], axis=0)
                for p in places:
                    rest[:, p, p] -= block
            first += d * m
        return float(np.abs(rest).sum(axis=2).max())


def find_line(group: DoubleGroup, k_start: FloatArray, k_end: FloatArray) -> SymmetryLine:
    """A line and the operations that fix it, time reversal included.

    The ends are moved onto the line that the operations fix exactly.
    """
    ends = np.array([k_start, k_end], dtype=float)
    actions = group.k_actions
    images = np.einsum("gij,ej->gei", actions, ends)
    shifts = images - ends
    cells = np.round(shifts)
    off = np.abs(shifts - cells).max(axis=(1, 2))
    fixing = np.flatnonzero((off < LINE_TOLERANCE) & np.all(cells[:, 0] == cells[:, 1], axis=1))
    exact = (images - cells)[fixing].mean(axis=0)
    table = find_coreps(little_group_at(group, exact.mean(axis=0), fixing))
    return SymmetryLine(frozen(exact[0]), frozen(exact[1]), table)


def split_line(
    group: DoubleGroup, line: SymmetryLine, operators: Sequence[WannierOperator]
) -> LineBlocks:
    """The basis in which H along the line is made of blocks.

    Parameters
    ----------
    group
        The group the line was found with.
    operators
        Its unitary operations on the Wannier functions, in its order.

    Raises
    ------
    LineError
        The operators are no representation of the group.
    """
    members = line.table.group.members
    chosen = [operators[g] for g in members]
    k = line.table.group.k_frac[None]
    matrices = np.array([operator_at(o, k)[0] for o in chosen])
    rows = tuple(_rows(irrep.matrices, matrices) for irrep in line.table.irreps)
    _check_basis(rows, matrices.shape[1])
    turns = _turns(chosen, group.translations[members], line.k_end - line.k_start)
    return LineBlocks(line, frozen(turns), rows)


def _rows(irrep: ComplexArray, matrices: ComplexArray) -> ComplexArray:
    """(d, n_orb, m) states of each row of an irrep, matched: P_i0 = (d/n) sum rho_i0* D."""
    n, d = irrep.shape[:2]
    transfer = np.tensordot(irrep[:, :, 0].conj(), matrices, axes=(0, 0)) * d / n
    shares, states = np.linalg.eigh(transfer[0])
    first = states[:, shares > 0.5]
    return np.asarray(transfer @ first)


def _check_basis(rows: Sequence[ComplexArray], n_orb: int) -> None:
    basis = np.concatenate([np.concatenate(list(r), axis=1) for r in rows], axis=1)
    if basis.shape[1] != n_orb or np.abs(basis.conj().T @ basis - np.eye(n_orb)).max() > CLOSED:
        raise LineError("the operators are no representation of the group of the line")


def _turns(
    operators: Sequence[WannierOperator], translations: FloatArray, along: FloatArray
) -> FloatArray:
    """(n_orb,) y of the module."""
    total = np.zeros(len(operators[0].matrix))
    for operator, w in zip(operators, translations, strict=True):
        before: IntArray = np.abs(operator.matrix).argmax(axis=1)
        total += (w - operator.shifts[before] + operator.homes) @ along
    return total / len(operators)
