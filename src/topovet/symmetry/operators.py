"""Space-group operations on the Wannier functions, and their products with time reversal.

For g = {W|w}, x' = W x + w in fractional coordinates, a function n at tau_n goes to
W tau_n + w = tau_m + L_n - C_m, its harmonics turn with D(W), its spin with the SU(2) matrix u(W)
of the proper part; C_m is the cell of m as counted from the first function on its site:

    g|n R> = sum_m |m, W R + L_n - C_m> M[m, n]
    D_g(k)[m, n] = exp(2 pi i k'.C_m) M[m, n] exp(-2 pi i k'.L_n),      k' = k W^-1
    D_g(k) H(k) D_g(k)† = H(k')                                        in the periodic gauge.

With time reversal, Theta|n R> = sum_m |m R> T[m, n] K, the antiunitary g Theta has
A(k) = D_g(-k) T and A(k) H(k)* A(k)† = H(-k').

The sign of u is a convention (scipy's quaternion with w >= 0; for half turns the first non-zero
component of the axis positive), kept in one place: `spin_rotation`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from scipy.spatial.transform import Rotation

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray, frozen
from topovet.errors import UndefinedError
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.real_harmonics import harmonic_rotation
from topovet.symmetry.operations import multiplication_table

SITE_TOLERANCE_ANG = 0.05
"""How far the image of a site may be from a site; structure files come with few digits."""

CLOSURE_TOLERANCE = 1e-6
"""Largest |M†M - 1| with which the declared orbitals count as closed under an operation."""

I_SIGMA_Y = np.array([[0.0, 1.0], [-1.0, 0.0]])


class NotClosedError(UndefinedError):
    """The declared orbitals are not mapped onto themselves."""


@dataclass(frozen=True, slots=True, eq=False)
class WannierOperator:
    """One operation on the Wannier functions.

    Attributes
    ----------
    rotation, translation
        W (3, 3) integer and w (3,) fractional, x' = W x + w in the Hamiltonian's cell.
    matrix
        (n_orb, n_orb) unitary M; for an antiunitary operation M T, which acts after complex
        conjugation.
    shifts
        (n_orb, 3) integer L_n, cell of the first function on the image's site.
    homes
        (n_orb, 3) integer C_m, cell of a function relative to the first one on its site; zero
        unless functions of one site are listed in different cells.
    antiunitary
        Whether time reversal is part of it.
    """

    rotation: IntArray
    translation: FloatArray
    matrix: ComplexArray
    shifts: IntArray
    homes: IntArray
    antiunitary: bool = False

    def __post_init__(self) -> None:
        for name in ("rotation", "translation", "matrix", "shifts", "homes"):
            object.__setattr__(self, name, frozen(getattr(self, name)))

    @property
    def k_rotation(self) -> IntArray:
        """(3, 3) integers that take a row k to the k' it is mapped to: k' = k @ k_rotation."""
        return _k_rotation(np.asarray(self.rotation, np.int64).tobytes(), self.antiunitary)


@lru_cache(maxsize=1024)  # asked for at every k
def _k_rotation(rotation: bytes, antiunitary: bool) -> IntArray:
    whole = np.frombuffer(rotation, dtype=np.int64).reshape(3, 3)
    inverse = np.round(np.linalg.inv(whole)).astype(np.int64)
    return frozen(-inverse if antiunitary else inverse)


def build_operator(
    basis: OrbitalBasis,
    crystal: Crystal,
    rotation: IntArray,
    translation: FloatArray,
    *,
    site_tolerance_ang: float = SITE_TOLERANCE_ANG,
) -> WannierOperator:
    """A unitary space-group operation in the declared basis.

    Parameters
    ----------
    basis
        Declared Wannier functions, in the Hamiltonian's order, spin interlaced or none.
    crystal
        Gives the cell in which distances and rotations are measured.
    rotation, translation
        W and w in that cell.
    site_tolerance_ang
        How far the image of a site may be from a site.

    Raises
    ------
    NotClosedError
        A site has no image, or the orbitals on it are not closed (e.g. a lone sp hybrid); or the
        operation turns the periodic plane of a layer out of itself.
    """
    rotation = np.asarray(rotation, dtype=np.int64)
    translation = np.asarray(translation, dtype=float)
    periodic = np.array(crystal.periodic)
    if rotation[np.ix_(~periodic, periodic)].any():
        raise NotClosedError("the operation does not keep the periodic directions")
    sites = basis.positions_frac
    first = first_on_site(sites, crystal)
    heads, site_of = np.unique(first, return_inverse=True)
    images = sites @ rotation.T + translation
    difference = images[heads][:, None, :] - sites[heads][None, :, :]
    distance = np.linalg.norm((difference - np.round(difference)) @ crystal.cell, axis=2)
    if len(heads) and distance.min(axis=1).max() > site_tolerance_ang:
        worst = int(distance.min(axis=1).argmax())
        raise NotClosedError(
            f"the operation moves the site of {basis.labels[heads[worst]]} "
            f"{distance[worst].min():.3f} angstrom away from every site"
        )
    target = distance.argmin(axis=1)[site_of]  # site on which the image of each function lies
    shifts = np.round(images - sites[heads[target]]).astype(np.int64)
    cartesian = cartesian_rotation(rotation, crystal.cell)
    overlap = basis.harmonics @ harmonic_rotation(cartesian) @ basis.harmonics.T
    may_mix = (site_of[:, None] == target) & (basis.shells[:, None] == basis.shells)
    matrix = np.where(may_mix, overlap * _spin_overlap(basis, cartesian), 0.0 + 0.0j)
    lost = np.abs(matrix.conj().T @ matrix - np.eye(len(sites))).max(axis=0, initial=0.0)
    if lost.max(initial=0.0) > CLOSURE_TOLERANCE:
        raise NotClosedError(
            f"{_names(basis, lost > CLOSURE_TOLERANCE)} not mapped onto declared orbitals by the "
            f"operation (|M†M - 1| = {lost.max():.2g})"
        )
    homes = cells_on_site(sites, crystal)
    # along a direction that is not periodic there is one cell
    shifts, homes = np.where(periodic, shifts, 0), np.where(periodic, homes, 0)
    return WannierOperator(rotation, translation, matrix, shifts, homes)


def _spin_overlap(basis: OrbitalBasis, cartesian: FloatArray) -> ComplexArray | float:
    """(n_orb, n_orb) spin part of M; functions without spin are left alone."""
    if not has_spin(basis):
        return 1.0
    return np.asarray(basis.spinors.conj() @ spin_rotation(cartesian) @ basis.spinors.T)


def has_spin(basis: OrbitalBasis) -> bool:
    """Whether the basis has both spin components; one without spin says (1, 0) throughout."""
    return bool(np.any(basis.spinors[:, 1]))


def _names(basis: OrbitalBasis, which: BoolArray, at_most: int = 4) -> str:
    """Names of some functions as the subject of a sentence, with its verb."""
    labels = [basis.labels[i] for i in np.flatnonzero(which)]
    more = f" and {len(labels) - at_most} more" if len(labels) > at_most else ""
    return f"{', '.join(labels[:at_most])}{more} {'are' if len(labels) > 1 else 'is'}"


def with_time_reversal(operator: WannierOperator, basis: OrbitalBasis) -> WannierOperator:
    """The product g Theta of a unitary operation with time reversal.

    Raises
    ------
    NotClosedError
        The basis lacks the spin partners of some functions.
    """
    return replace(operator, matrix=operator.matrix @ time_reversal_matrix(basis), antiunitary=True)


def time_reversal_matrix(basis: OrbitalBasis) -> ComplexArray:
    """T of Theta|n R> = sum_m |m R> T[m, n] K, (n_orb, n_orb) unitary.

    Real harmonics are left alone. The spin of a spinful basis is turned over by i sigma_y; a basis
    without spin (every spinor (1, 0)) is real, T = 1.

    Raises
    ------
    NotClosedError
        The basis lacks the spin partners of some functions.
    """
    if not has_spin(basis):
        return np.eye(basis.n_orb, dtype=np.complex128)
    spin = basis.spinors.conj() @ I_SIGMA_Y @ basis.spinors.conj().T
    same_place = np.all(basis.positions_frac[:, None] == basis.positions_frac[None], axis=2)
    same_shell = basis.shells[:, None] == basis.shells[None, :]
    t = np.where(same_place & same_shell, (basis.harmonics @ basis.harmonics.T) * spin, 0.0)
    lost = np.abs(t.conj().T @ t - np.eye(len(t))).max(axis=0)
    if lost.max() > CLOSURE_TOLERANCE:
        raise NotClosedError(f"{_names(basis, lost > CLOSURE_TOLERANCE)} without spin partner")
    return np.asarray(t)


def operator_at(operator: WannierOperator, k_frac: FloatArray) -> ComplexArray:
    """D(k), or A(k) of an antiunitary operation, (n_k, n_orb, n_orb), for k_frac (n_k, 3)."""
    k_image = np.asarray(k_frac, dtype=float) @ operator.k_rotation
    after = np.exp(2j * np.pi * (k_image @ operator.homes.T))
    before = np.exp(-2j * np.pi * (k_image @ operator.shifts.T))
    return np.asarray(after[:, :, None] * operator.matrix * before[:, None, :])


def cartesian_rotation(rotation: IntArray, cell: FloatArray) -> FloatArray:
    """(3, 3) orthogonal matrix on Cartesian column vectors of a W in fractional coordinates."""
    return np.asarray(cell.T @ rotation @ np.linalg.inv(cell.T))


def spin_rotation(cartesian: FloatArray) -> ComplexArray:
    """SU(2) matrix (2, 2) of the proper part of an orthogonal matrix, in the fixed sign."""
    return _spin_rotation(np.ascontiguousarray(cartesian, dtype=float).tobytes())


@lru_cache(maxsize=1024)
def _spin_rotation(orthogonal: bytes) -> ComplexArray:
    cartesian = np.frombuffer(orthogonal).reshape(3, 3)
    proper = np.linalg.det(cartesian) * cartesian
    x, y, z, w = Rotation.from_matrix(proper).as_quat()
    leading = next((c for c in (w, x, y, z) if abs(c) > 1e-6), 1.0)
    x, y, z, w = np.sign(leading) * np.array([x, y, z, w])
    return frozen(np.array([[w - 1j * z, -1j * x - y], [-1j * x + y, w + 1j * z]]))


def first_on_site(sites_frac: FloatArray, crystal: Crystal) -> IntArray:
    """(n_orb,) index of the first function on the site of each function."""
    apart = sites_frac[:, None, :] - sites_frac[None, :, :]
    distance = np.linalg.norm((apart - np.round(apart)) @ crystal.cell, axis=2)
    return np.asarray((distance < SITE_TOLERANCE_ANG).argmax(axis=1), dtype=np.int64)


def cells_on_site(sites_frac: FloatArray, crystal: Crystal) -> IntArray:
    """(n_orb, 3) cell of each function relative to the first one on the same site."""
    apart = sites_frac - sites_frac[first_on_site(sites_frac, crystal)]
    return np.asarray(np.round(apart), dtype=np.int64)


@dataclass(frozen=True, slots=True, eq=False)
class FactorSystem:
    """Products of operators against products of operations.

    Attributes
    ----------
    product
        (n_op, n_op) index of the operation g_a g_b.
    sign
        (n_op, n_op) +1 or -1 with g_a g_b = sign g_c on the Wannier functions, up to lattice
        translations; all +1 without spin.
    defect
        Largest deviation of such a product from its operator.
    """

    product: IntArray
    sign: IntArray
    defect: float


def factor_system(operators: Sequence[WannierOperator]) -> FactorSystem:
    """Multiplication table of operators, and how well the matrices obey it.

    D_a(b k) D_b(k) = s exp(-2 pi i k''.t) D_c(k), with t the lattice translation by which g_a g_b
    differs from g_c and k'' = a b k. An antiunitary g_a conjugates what stands to its right.
    Checked at one generic k.

    Raises
    ------
    NotClosedError
        A product is not among the operations.
    """
    k = np.array([[np.sqrt(2) - 1, np.sqrt(3) - 1, np.sqrt(5) - 2]])
    rotations = np.array([o.rotation for o in operators])
    translations = np.array([o.translation for o in operators])
    antiunitary = np.array([o.antiunitary for o in operators])
    product, cells = multiplication_table(rotations, translations, antiunitary)
    if (product < 0).any():
        raise NotClosedError("the operations are not closed under multiplication")
    at_k = np.concatenate([operator_at(o, k) for o in operators])
    sign, defect = np.empty(product.shape, dtype=np.int64), 0.0
    for b, second in enumerate(operators):
        k_between: FloatArray = k @ second.k_rotation.astype(float)
        first_at = np.concatenate([operator_at(o, k_between) for o in operators])
        made = first_at @ np.where(antiunitary[:, None, None], at_k[b].conj(), at_k[b])
        k_end = np.concatenate([k_between @ o.k_rotation for o in operators])
        phase = np.exp(-2j * np.pi * (k_end * cells[:, b]).sum(axis=1))
        expected = phase[:, None, None] * at_k[product[:, b]]
        ratio = np.einsum("amn,amn->a", expected.conj(), made).real
        sign[:, b] = np.where(ratio < 0, -1, 1)
        difference = made - sign[:, b, None, None] * expected
        defect = max(defect, float(np.abs(difference).max(initial=0.0)))
    return FactorSystem(product, sign, defect)
