"""Any of the 230 space groups in a primitive cell, and atomic insulators of them.

The operations are those of the spglib database for the first setting of each group, the cells
made up to fit the crystal system and nothing more.
"""

from __future__ import annotations

import functools
import itertools
import warnings
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import spglib

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.symmetry.little_group import OperationList
from topovet.symmetry.operators import (
    WannierOperator,
    build_operator,
    operator_at,
    time_reversal_matrix,
    with_time_reversal,
)


@dataclass(frozen=True, slots=True, eq=False)
class GroupSample:
    """A space group in a primitive cell, angstrom and fractional."""

    number: int
    cell: FloatArray
    rotations: IntArray
    translations: FloatArray

    @property
    def crystal(self) -> Crystal:
        return Crystal(self.cell, (), np.zeros((0, 3)))

    def operations(self, *, spinful: bool, time_reversal: bool = True) -> OperationList:
        """The group, doubled by time reversal if wanted."""
        copies = 2 if time_reversal else 1
        return OperationList(
            cell=self.cell,
            rotations=np.concatenate([self.rotations] * copies),
            translations=np.concatenate([self.translations] * copies),
            antiunitary=np.repeat([False, True][:copies], len(self.rotations)),
            spinful=spinful,
        )

    def operators(self, basis: OrbitalBasis) -> tuple[WannierOperator, ...]:
        """Unitary operators on a basis, then their products with time reversal."""
        unitary = [
            build_operator(basis, self.crystal, w, t)
            for w, t in zip(self.rotations, self.translations, strict=True)
        ]
        return (*unitary, *(with_time_reversal(o, basis) for o in unitary))


def conventional_cell(number: int) -> FloatArray:
    """A cell of the crystal system of a group, hexagonal axes for trigonal ones."""
    if number >= 195:
        return 6.0 * np.eye(3)
    if number >= 143:
        return np.array([[5.0, 0, 0], [-2.5, 2.5 * np.sqrt(3), 0], [0, 0, 7.3]])
    if number >= 75:
        return np.diag([5.0, 5.0, 7.3])
    if number >= 16:
        return np.diag([4.7, 5.9, 7.3])
    if number >= 3:
        return np.array([[4.7, 0, 0], [0, 5.9, 0], [-1.3, 0, 7.1]])
    return np.array([[4.7, 0, 0], [0.6, 5.9, 0], [-1.3, 0.8, 7.1]])


@functools.cache
def sample_group(number: int) -> GroupSample:
    """A space group by its international number."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)  # spglib's change of error handling
        hall = next(h for h in range(1, 531) if spglib.get_spacegroup_type(h).number == number)
        found = spglib.get_symmetry_from_database(hall)
    rotations = np.array(found["rotations"], dtype=np.int64)
    translations = np.array(found["translations"], dtype=float)
    identity = np.all(rotations == np.eye(3, dtype=np.int64), axis=(1, 2))
    primitive = primitive_vectors(translations[identity], conventional_cell(number))
    # rows of `primitive` are the new lattice vectors in the old ones: x_old = x_new @ primitive
    inverse = np.linalg.inv(primitive)
    new_rotations = np.round(inverse.T @ rotations @ primitive.T).astype(np.int64)
    new_translations = (translations @ inverse) % 1.0
    new_translations = np.round(new_translations * 24) / 24 % 1.0
    _, first = np.unique(new_rotations.reshape(-1, 9), axis=0, return_index=True)
    kept = np.sort(first)
    return GroupSample(
        number,
        primitive @ conventional_cell(number),
        new_rotations[kept],
        new_translations[kept],
    )


def primitive_vectors(centring: FloatArray, cell: FloatArray) -> FloatArray:
    """(3, 3) short lattice vectors, as rows in the conventional axes, that span all of them."""
    steps = np.array(list(itertools.product((-1, 0, 1), repeat=3)))
    vectors = (centring[:, None, :] + steps[None]).reshape(-1, 3)
    lengths = np.round(np.linalg.norm(vectors @ cell, axis=1), 6)
    vectors = vectors[np.lexsort((*-vectors.T, lengths))][1:]
    for a, b, c in itertools.combinations(range(min(24, len(vectors))), 3):
        chosen = vectors[[a, b, c]]
        volume = np.linalg.det(chosen)
        if abs(abs(volume) - 1 / len(centring)) < 1e-6:
            return chosen if volume > 0 else -chosen
    raise AssertionError("no primitive cell found")


def orbit(sample: GroupSample, position: Sequence[float] | FloatArray) -> FloatArray:
    """(n, 3) images of a position in the home cell, itself first."""
    images = sample.rotations @ np.asarray(position, dtype=float) + sample.translations
    found: list[FloatArray] = []
    for image in images % 1.0:
        apart = np.array(found).reshape(-1, 3) - image
        if not len(found) or np.abs(apart - np.round(apart)).max(axis=1).min() > 1e-6:
            found.append(image)
    return np.array(found)


def atomic_basis(positions: FloatArray, l_max: int) -> OrbitalBasis:
    """All real harmonics up to l_max with both spins on every position."""
    n = (l_max + 1) ** 2
    spins = np.eye(2, dtype=complex)
    return OrbitalBasis(
        np.repeat(positions, 2 * n, axis=0),
        np.tile(np.repeat(np.eye(16)[:n], 2, axis=0), (len(positions), 1)),
        np.tile(spins, (len(positions) * n, 1)),
        tuple(f"site{i // (2 * n)} orbital{i % (2 * n)}" for i in range(len(positions) * 2 * n)),
        np.ones(len(positions) * 2 * n, dtype=np.int64),
    )


def atomic_levels(
    operators: Sequence[WannierOperator], basis: OrbitalBasis, seed: int
) -> list[ComplexArray]:
    """(n_orb, d) bases of the levels of a random site Hamiltonian with the group's symmetry.

    Each is an atomic insulator by itself: an irrep of the site symmetry, with time reversal, on
    every site of the orbit, and nothing that depends on k.
    """
    rng = np.random.default_rng(seed)
    n = basis.n_orb
    x = rng.standard_normal((n, n)) + 1j * rng.standard_normal((n, n))
    apart = basis.positions_frac[:, None] - basis.positions_frac[None]
    same_site = np.all(np.abs(apart) < 1e-6, axis=2)
    x = np.where(same_site, x + x.conj().T, 0.0)
    t = time_reversal_matrix(basis)
    x = x + t @ x.conj() @ t.conj().T
    unitary = [o.matrix for o in operators if not o.antiunitary]
    h = sum(m @ x @ m.conj().T for m in unitary) / len(unitary)
    energies, states = np.linalg.eigh(h)
    edges = np.flatnonzero(np.diff(energies) > 1e-7) + 1
    return [states[:, part] for part in np.split(np.arange(n), edges)]


class FlatBloch:
    """H(k) that does not depend on k, (n_orb, n_orb) eV."""

    def __init__(self, h: ComplexArray) -> None:
        self._h = h

    def at(self, k_frac: FloatArray) -> ComplexArray:
        """(n_k, n_orb, n_orb) eV."""
        return np.repeat(self._h[None], len(k_frac), axis=0)


class SymmetrisedBloch:
    """A random H(k) with the whole symmetry of a group, made at each k by averaging.

    H(k) = (1/n) sum_g D_g(k)† H0(gk) D_g(k), antiunitary operations included, with H0 of random
    hoppings to neighbouring cells.

    Parameters
    ----------
    operators
        A group modulo lattice translations.
    seed
        Of the hoppings.
    hop
        Size of the hoppings next to on-site energies of size 1.
    """

    def __init__(self, operators: Sequence[WannierOperator], seed: int, *, hop: float) -> None:
        rng = np.random.default_rng(seed)
        self._operators = operators
        self.n_orb = len(operators[0].matrix)
        self._cells = np.array(list(itertools.product((-1, 0, 1), repeat=3)))
        shape = (len(self._cells), self.n_orb, self.n_orb)
        blocks = rng.standard_normal(shape) + 1j * rng.standard_normal(shape)
        size = np.where(np.any(self._cells != 0, axis=1), hop, 1.0)
        blocks = blocks * size[:, None, None]
        self._blocks = blocks + blocks[::-1].conj().transpose(0, 2, 1)

    def _bare(self, k_frac: FloatArray) -> ComplexArray:
        phases = np.exp(2j * np.pi * (k_frac @ self._cells.T))
        return np.tensordot(phases, self._blocks, axes=1)

    def at(self, k_frac: FloatArray) -> ComplexArray:
        """(n_k, n_orb, n_orb) eV."""
        k_frac = np.asarray(k_frac, dtype=float)
        total = np.zeros((len(k_frac), self.n_orb, self.n_orb), dtype=complex)
        for operator in self._operators:
            d = operator_at(operator, k_frac)
            image = self._bare(k_frac @ operator.k_rotation)
            back = d.conj().transpose(0, 2, 1) @ image @ d
            total += back.conj() if operator.antiunitary else back
        return total / len(self._operators)
