"""Crystals in many space groups, orbitals on their sites, Hamiltonians whose symmetry is known.

`shell_hamiltonian` is symmetric by geometry alone: its elements are integrals of real functions
with a kernel that depends on distances, evaluated by quadrature. No matrix of any operation
enters, so that it tests those matrices from outside.
"""

from __future__ import annotations

import functools
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from ase.spacegroup import crystal as ase_crystal

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel, build_model
from topovet.model.hybrids import harmonic_coefficients
from topovet.model.real_harmonics import compute_harmonics
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import WannierOperator, with_time_reversal
from topovet.symmetry.spacegroup import find_space_group

Site = tuple[float, float, float]

SHELLS = {
    "s": [(0, 1)],
    "p": [(1, m) for m in (1, 2, 3)],
    "d": [(2, m) for m in range(1, 6)],
    "f": [(3, m) for m in range(1, 8)],
    "sp3": [(-3, m) for m in range(1, 5)],
    "sp3d2": [(-5, m) for m in range(1, 7)],
}
"""Wannier90's (l, mr) of whole sets of functions."""


@dataclass(frozen=True, slots=True)
class Recipe:
    """A crystal by its space group: kinds of atoms on Wyckoff positions, and their orbitals.

    A kind "X" is no atom but a place between atoms that carries orbitals.
    """

    number: int
    kinds: tuple[str, ...]
    sites: tuple[Site, ...]
    cell: tuple[float, float, float, float, float, float]
    shells: tuple[str, ...]
    setting: int = 1


def _recipe(number: int, sites: str, cell: str, shells: str, *, setting: int = 1) -> Recipe:
    """From text: "Ti 0 0 0, O .3 .3 0", "4 4 3 90 90 90", "d p"."""
    kinds, places = [], []
    for part in sites.split(","):
        kind, *numbers = part.split()
        x, y, z = (float(Fraction(n)) for n in numbers)
        kinds.append(kind)
        places.append((x, y, z))
    a, b, c, alpha, beta, gamma = (float(n) for n in cell.split())
    cell_parameters = (a, b, c, alpha, beta, gamma)
    return Recipe(
        number, tuple(kinds), tuple(places), cell_parameters, tuple(shells.split()), setting
    )


RECIPES = (
    _recipe(2, "Bi .11 .22 .34, Se 0 0 0", "4.1 5.2 4.7 81 97 103", "p d"),
    _recipe(4, "Te .1 .2 .3, Se .55 .01 .13", "4.2 4.9 5.4 90 101 90", "sp3 s"),
    _recipe(14, "As .13 .21 .32", "4.4 5.1 4.8 90 107 90", "p"),
    _recipe(19, "Se .12 .23 .07", "4.1 4.9 5.6 90 90 90", "p"),
    _recipe(31, "Ge 0 .2 .1, S .22 .41 .36", "4.9 5.2 5.5 90 90 90", "p s"),
    _recipe(62, "Sn .12 .25 .07", "5.1 4.1 5.9 90 90 90", "p"),
    _recipe(63, "Zr 0 .3 .25, Te 0 .05 .25", "4.0 9.1 5.2 90 90 90", "d s"),
    _recipe(76, "I .1 .2 0", "4.6 4.6 6.1 90 90 90", "p"),
    _recipe(92, "Te .11 .11 0", "4.5 4.5 6.3 90 90 90", "p"),
    _recipe(122, "Cu 0 0 0, Ge 0 0 .5, S .26 .25 .125", "4.9 4.9 9.2 90 90 90", "d s s"),
    _recipe(136, "Ti 0 0 0, O .305 .305 0", "4.6 4.6 3.0 90 90 90", "d p"),
    _recipe(139, "Ba 0 0 0, Hg 0 0 .36", "3.9 3.9 10.1 90 90 90", "d sp3d2"),
    _recipe(141, "Si 0 0 0", "4.6 4.6 5.5 90 90 90", "sp3"),
    _recipe(148, "Bi 0 0 .17, I .34 .04 .08", "7.1 7.1 12.4 90 90 120", "p s"),
    _recipe(152, "Te .27 0 1/3", "4.5 4.5 5.9 90 90 120", "p"),
    _recipe(161, "Li 0 0 .28, Nb 0 0 0, O .05 .34 .07", "5.1 5.1 13.0 90 90 120", "s d s"),
    _recipe(164, "Bi 1/3 2/3 .2, Te 0 0 0", "4.4 4.4 6.0 90 90 120", "p f"),
    _recipe(166, "Bi 0 0 .4, Se 0 0 0, Se 0 0 .21", "4.1 4.1 15.0 90 90 120", "p s p"),
    _recipe(186, "Ag 1/3 2/3 0, I 1/3 2/3 .375",
            "4.6 4.6 7.5 90 90 120", "s sp3"),
    _recipe(187, "W 0 0 0, C 1/3 2/3 .5", "2.9 2.9 2.8 90 90 120", "d p"),
    _recipe(194, "Na 1/3 2/3 .25, Bi 0 0 0", "4.4 4.4 7.6 90 90 120", "f p"),
    _recipe(198, "Co .14 .14 .14", "4.4 4.4 4.4 90 90 90", "d"),
    _recipe(205, "Fe 0 0 0, S .385 .385 .385", "5.4 5.4 5.4 90 90 90", "p s"),
    _recipe(216, "Hg 0 0 0, Te .25 .25 .25", "6.4 6.4 6.4 90 90 90", "s sp3"),
    _recipe(220, "Te .08 .08 .08", "6.1 6.1 6.1 90 90 90", "s"),
    _recipe(221, "Sm 0 0 0, B .5 .5 .5, X .5 0 0", "4.1 4.1 4.1 90 90 90", "f sp3d2 s"),
    _recipe(225, "Pb 0 0 0, Te .5 .5 .5", "6.4 6.4 6.4 90 90 90", "p d"),
    _recipe(227, "Si .125 .125 .125, X 0 0 0", "5.4 5.4 5.4 90 90 90", "p s", setting=2),
    _recipe(230, "Nb .25 .125 0", "6.0 6.0 6.0 90 90 90", "s", setting=1),
)  # fmt: skip
"""Symmorphic groups (2, 139, 148, 164, 166, 187, 216, 221, 225) and others, all crystal systems."""


@dataclass(frozen=True, slots=True, eq=False)
class CrystalModel:
    """A crystal in its primitive cell with orbitals on its sites.

    Attributes
    ----------
    crystal, basis
        As `topovet.model` defines them.
    rotations, translations
        All operations of the space group in that cell.
    kind_of
        (n_orb,) kind of site of each function.
    """

    crystal: Crystal
    basis: OrbitalBasis
    rotations: IntArray
    translations: FloatArray
    kind_of: IntArray

    @property
    def spinful(self) -> bool:
        return bool(self.basis.spinors[:, 1].any())

    def operators(self) -> tuple[WannierOperator, ...]:
        """All operations on the functions; none may be missing."""
        built = build_operators(self.basis, self.crystal, self.rotations, self.translations)
        assert not built.reasons
        return built.operators

    def time_reversal(self) -> WannierOperator:
        neutral = next(o for o in self.operators() if np.array_equal(o.rotation, np.eye(3)))
        return with_time_reversal(neutral, self.basis)


@functools.cache
def crystal_model(recipe: Recipe, *, spinful: bool) -> CrystalModel:
    """The crystal of a recipe, its space group checked."""
    parts = [
        ase_crystal(
            [kind],
            [site],
            spacegroup=recipe.number,
            setting=recipe.setting,
            cellpar=recipe.cell,
            primitive_cell=True,
        )
        for kind, site in zip(recipe.kinds, recipe.sites, strict=True)
    ]
    cell = parts[0].cell.array
    symbols = [
        k for kind, part in zip(recipe.kinds, parts, strict=True) for k in [kind] * len(part)
    ]
    places = np.concatenate([part.get_scaled_positions() for part in parts])
    on_atom = [symbol != "X" for symbol in symbols]
    crystal = Crystal(cell, tuple(s for s in symbols if s != "X"), places[on_atom])
    group = find_space_group(crystal)
    assert group.number == recipe.number, f"{group.number} is not {recipe.number}"
    rows, kind_of = [], []
    for kind, (part, shell) in enumerate(zip(parts, recipe.shells, strict=True)):
        for place in part.get_scaled_positions():
            rows += [(place, harmonic_coefficients(l, mr)) for l, mr in SHELLS[shell]]
            kind_of += [kind] * len(SHELLS[shell])
    basis = orbital_basis(rows, spinful=spinful)
    spins = 2 if spinful else 1
    return CrystalModel(
        crystal, basis, group.rotations, group.translations, np.repeat(kind_of, spins)
    )


def orbital_basis(rows: Sequence[tuple[FloatArray, FloatArray]], *, spinful: bool) -> OrbitalBasis:
    """Basis from (position, harmonic coefficients); spin up and down of each where spinful."""
    spins = 2 if spinful else 1
    n = spins * len(rows)
    return OrbitalBasis(
        np.repeat(np.array([place for place, _ in rows]), spins, axis=0),
        np.repeat(np.array([harmonics for _, harmonics in rows]), spins, axis=0),
        np.tile(np.eye(2, dtype=complex)[:spins], (len(rows), 1)),
        tuple(f"function {i + 1}" for i in range(n)),
        np.ones(n, dtype=np.int64),
    )


def near_cells(reach: int = 1) -> IntArray:
    """All lattice vectors with components up to `reach`."""
    return np.array([np.subtract(r, reach) for r in np.ndindex((2 * reach + 1,) * 3)])


def random_hamiltonian(model: CrystalModel, seed: int) -> TightBindingModel:
    """Random Hermitian H(R) on the nearest 27 cells: no symmetry at all."""
    rng = np.random.default_rng(seed)
    r_cells, n = near_cells(), model.basis.n_orb
    h_r = rng.normal(size=(len(r_cells), n, n, 2)) @ np.array([1, 1j])
    h_r *= np.exp(-np.linalg.norm(r_cells, axis=1))[:, None, None]
    return build_model(r_cells, h_r, spinful=model.spinful)


RADIUS_ANG, WIDTH_ANG = 0.7, 1.4


def shell_hamiltonian(
    model: CrystalModel, *, reach_ang: float = 5.3, soc: float = 1.0
) -> TightBindingModel:
    """Orbitals as functions on spheres of 0.7 A around their sites, coupled by a Gaussian.

    H_ab = c_AB int int Y_a(u) [1 + i soc (u x u').sigma] Y_b(u') exp(-|d + r u' - r u|^2 / 2 w^2),

    over both spheres, with d the vector between the sites and c_AB a number for the kinds of both.
    Every isometry that maps the crystal onto itself is a symmetry, and so is time reversal:
    (u x u') is an axial vector, and i sigma is even under time reversal. The integrals are done
    on a Gauss-Legendre grid that is exact to 1e-11 for them.
    """
    r_cells = near_cells(2)
    positions = model.basis.positions_frac
    n_spin = 2 if model.spinful else 1
    spatial = slice(None, None, n_spin)
    y = model.basis.harmonics[spatial] @ _sphere()[2]
    sites = _first_of_sites(positions[spatial])
    h_r = np.zeros((len(r_cells), len(positions), len(positions)), dtype=complex)
    for i, members_i in sites:
        for j, members_j in sites:
            d = (positions[spatial][j] + r_cells - positions[spatial][i]) @ model.crystal.cell
            length = np.linalg.norm(d, axis=1)
            assert np.abs(length - reach_ang).min() > 1e-4, "a bond ends on the cut-off"
            kinds = sorted((model.kind_of[spatial][i], model.kind_of[spatial][j]))
            strength = 0.5 + 0.37 * kinds[0] - 0.21 * kinds[1] ** 2
            for r in np.flatnonzero(length < reach_ang):
                block = strength * _two_spheres(y[members_i], y[members_j], d[r], n_spin, soc)
                rows = np.add.outer(members_i * n_spin, np.arange(n_spin)).reshape(-1)
                columns = np.add.outer(members_j * n_spin, np.arange(n_spin)).reshape(-1)
                h_r[r][np.ix_(rows, columns)] = block
    return build_model(r_cells, h_r, spinful=model.spinful)


def _first_of_sites(positions: FloatArray) -> list[tuple[int, IntArray]]:
    _, first, which = np.unique(positions, axis=0, return_index=True, return_inverse=True)
    return [(int(f), np.flatnonzero(which.reshape(-1) == s)) for s, f in enumerate(first)]


@functools.cache
def _sphere() -> tuple[FloatArray, ComplexArray, FloatArray]:
    """Directions (n, 3), couplings (4, n, n) of two of them, and weighted harmonics (16, n).

    The couplings are the Gaussian's part that knows both directions: alone, and with each
    component of u x u'.
    """
    cosines, weights = np.polynomial.legendre.leggauss(12)
    phi = 2 * np.pi * np.arange(24) / 24
    sines = np.sqrt(1 - cosines**2)[:, None]
    u = np.stack(
        [sines * np.cos(phi), sines * np.sin(phi), np.repeat(cosines[:, None], 24, axis=1)], axis=2
    ).reshape(-1, 3)
    weight = np.repeat(weights * 2 * np.pi / 24, 24)
    # |d + r u' - r u|^2 = d^2 + 2 r^2 (1 - u.u') + 2 r d.(u' - u)
    both = np.exp(RADIUS_ANG**2 / WIDTH_ANG**2 * (u @ u.T - 1))
    cross = np.cross(u[:, None, :], u[None, :, :])
    couplings = np.concatenate([both[None], both * cross.transpose(2, 0, 1)])
    return u, couplings, compute_harmonics(u).T * weight


def _two_spheres(
    y_i: FloatArray, y_j: FloatArray, d: FloatArray, n_spin: int, soc: float
) -> ComplexArray:
    u, couplings, _ = _sphere()
    slope = np.exp(RADIUS_ANG / WIDTH_ANG**2 * (u @ d))
    parts = (y_i * slope) @ couplings @ (y_j / slope).T * np.exp(-d @ d / (2 * WIDTH_ANG**2))
    if n_spin == 1:
        return parts[0].astype(complex)
    sigma = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])
    with_spin = np.kron(parts[0], np.eye(2)).astype(complex)
    for part, pauli in zip(parts[1:], sigma, strict=True):
        with_spin += 1j * soc * np.kron(part, pauli)
    return with_spin
