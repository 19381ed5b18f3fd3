"""What a lattice model is made of: orbitals on sites, hopping blocks, bonds between neighbours.

Energies in eV, lengths in angstrom; H_mn(R) = <m 0|H|n R>, H(k) = sum_R exp(2 pi i k.R) H(R).
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel, build_model

HARMONICS = ("s", "pz", "px", "py")
"""Names of the first columns of `OrbitalBasis.harmonics`."""

SIGMA: ComplexArray = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])
"""Pauli matrices x, y, z."""

VACUUM_ANGSTROM = 20.0
"""Third lattice vector of the two-dimensional models."""

IN_PLANE = (True, True, False)
"""Periodic directions of the two-dimensional models."""

Matrix = FloatArray | ComplexArray
Vector = tuple[float, float, float]
Cell = tuple[int, int, int]


@dataclass(frozen=True, slots=True, eq=False)
class LatticeModel:
    """A tight-binding model with all that a case folder would say about it.

    Attributes
    ----------
    name
        Seed name of its files.
    crystal, basis
        As `topovet.model` defines them.
    r_cells
        (n_r, 3) integer lattice vectors, each with its negative.
    h_r
        (n_r, n_orb, n_orb) eV, all weights applied.
    filling
        Occupied bands, spin counted.
    spinful
        Whether the orbitals come in spin pairs.
    centre
        An inversion centre of the crystal, fractional; where the Hamiltonian has no inversion
        it is still the centre of the undistorted model.
    """

    name: str
    crystal: Crystal
    basis: OrbitalBasis
    r_cells: IntArray
    h_r: ComplexArray
    filling: int
    spinful: bool
    centre: Vector

    @property
    def n_orb(self) -> int:
        return self.basis.n_orb

    def tight_binding(self) -> TightBindingModel:
        """The model in the form the package computes with."""
        return build_model(self.r_cells, self.h_r, spinful=self.spinful)

    def hamiltonian_at(self, k_frac: Sequence[float]) -> ComplexArray:
        """H(k), (n_orb, n_orb) eV, by a plain loop over R: independent of the package."""
        h = np.zeros((self.n_orb, self.n_orb), dtype=complex)
        for r_cell, block in zip(self.r_cells, self.h_r, strict=True):
            h += np.exp(2j * np.pi * float(np.dot(k_frac, r_cell))) * block
        return h


class Terms:
    """Collects on-site and hopping blocks, each hopping with its Hermitian partner."""

    def __init__(self, n_orb: int) -> None:
        self._blocks: dict[Cell, ComplexArray] = defaultdict(
            lambda: np.zeros((n_orb, n_orb), dtype=complex)
        )

    def add(self, r_cell: Sequence[int], rows: slice, columns: slice, block: Matrix) -> None:
        """H(R)[rows, columns] += block and H(-R)[columns, rows] += block†."""
        r = (int(r_cell[0]), int(r_cell[1]), int(r_cell[2]))
        self._blocks[r][rows, columns] += block
        self._blocks[(-r[0], -r[1], -r[2])][columns, rows] += block.conj().T

    def add_onsite(self, where: slice, block: Matrix) -> None:
        self._blocks[(0, 0, 0)][where, where] += block

    def arrays(self) -> tuple[IntArray, ComplexArray]:
        """Lattice vectors in order and their blocks."""
        cells = sorted(self._blocks)
        return np.array(cells, dtype=np.int64), np.array([self._blocks[r] for r in cells])


def build_basis(
    orbitals: Sequence[tuple[str, Sequence[float] | FloatArray, str]], *, spinful: bool = True
) -> OrbitalBasis:
    """Basis from (site label, position, harmonic name), spin up and down for each if spinful."""
    spins = [("up", (1, 0)), ("down", (0, 1))] if spinful else [("", (1, 0))]
    positions, harmonics, spinors, labels = [], [], [], []
    for site, position, harmonic in orbitals:
        row = np.zeros(16)
        row[HARMONICS.index(harmonic)] = 1.0
        for spin_name, spinor in spins:
            positions.append(position)
            harmonics.append(row)
            spinors.append(spinor)
            labels.append(f"{site} {harmonic} {spin_name}".rstrip())
    return OrbitalBasis(
        np.array(positions, dtype=float),
        np.array(harmonics),
        np.array(spinors, dtype=complex),
        tuple(labels),
        np.ones(len(labels), dtype=np.int64),
    )


def bonds(cell: FloatArray, positions: FloatArray, i: int, j: int) -> list[tuple[Cell, FloatArray]]:
    """Nearest-neighbour bonds from site i to copies of site j: (R, vector from i to j in A)."""
    found = []
    for r in np.ndindex(3, 3, 3):
        r_cell = (r[0] - 1, r[1] - 1, r[2] - 1)
        vector = (positions[j] + r_cell - positions[i]) @ cell
        found.append((r_cell, vector))
    lengths = [float(np.linalg.norm(v)) for _, v in found]
    nearest = min(length for length in lengths if length > 1e-6)
    return [
        bond for bond, length in zip(found, lengths, strict=True) if abs(length - nearest) < 1e-6
    ]


def honeycomb_cell(a: float) -> FloatArray:
    return np.array([[a, 0, 0], [-a / 2, a * np.sqrt(3) / 2, 0], [0, 0, VACUUM_ANGSTROM]])


def two_steps(
    cell: FloatArray, positions: FloatArray, i: int
) -> list[tuple[Cell, FloatArray, FloatArray]]:
    """Next-nearest neighbours of site i of a two-site lattice on its own sublattice.

    Returns (R, d1, d2) for every <i 0|H|i R> with R != 0: d1 and d2 are the two bonds that lead
    from the site in cell R over the common neighbour to the site in the home cell.
    """
    j = 1 - i
    steps = []
    for r_mid, to_mid in bonds(cell, positions, i, j):
        for r_last, to_last in bonds(cell, positions, j, i):
            r_cell = tuple(int(x) for x in np.add(r_mid, r_last))
            if any(r_cell):
                steps.append(((r_cell[0], r_cell[1], r_cell[2]), -to_last, -to_mid))
    return steps


def angular_momentum(component: int, axes: Sequence[int]) -> ComplexArray:
    """L_component on real p orbitals along the given axes: <i|L_k|j> = -i epsilon_kij."""
    epsilon = np.zeros((3, 3, 3))
    for i in range(3):
        epsilon[i, (i + 1) % 3, (i + 2) % 3] = 1.0
        epsilon[i, (i + 2) % 3, (i + 1) % 3] = -1.0
    return np.asarray(-1j * epsilon[component][np.ix_(list(axes), list(axes))])


def l_dot_sigma(axes: Sequence[int]) -> ComplexArray:
    """L.sigma on p orbitals (x) spin: 1 for j = 3/2, -2 for j = 1/2."""
    parts = [np.kron(angular_momentum(i, axes), SIGMA[i]) for i in range(3)]
    return np.asarray(np.sum(parts, axis=0))


def with_onsite(model: LatticeModel, onsite: ComplexArray | FloatArray) -> LatticeModel:
    h_r = model.h_r.copy()
    h_r[~model.r_cells.any(axis=1)] += onsite
    return replace(model, h_r=h_r)


def with_hops(model: LatticeModel, hops: Mapping[Cell, ComplexArray]) -> LatticeModel:
    """The model and H(R) for more R, each with its partner."""
    r_cells, h_r = list(map(tuple, model.r_cells.tolist())), list(model.h_r)
    for r_cell, block in hops.items():
        r_cells += [r_cell, (-r_cell[0], -r_cell[1], -r_cell[2])]
        h_r += [block, block.conj().T]
    return replace(model, r_cells=np.array(r_cells, dtype=np.int64), h_r=np.array(h_r))
