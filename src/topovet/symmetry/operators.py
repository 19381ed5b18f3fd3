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

import numpy as np
from scipy.spatial.transform import Rotation

from topovet.arrays import ComplexArray, FloatArray, IntArray, frozen
from topovet.errors import UndefinedError
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.real_harmonics import harmonic_rotation

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
        inverse = np.round(np.linalg.inv(self.rotation)).astype(np.int64)
        return -inverse if self.antiunitary else inverse


def build_operator(
    basis: OrbitalBasis, crystal: Crystal, rotation: IntArray, translation: FloatArray
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

    Raises
    ------
    NotClosedError
        A site has no image, or the orbitals on it are not closed (e.g. a lone sp hybrid).
    """
    rotation = np.asarray(rotation, dtype=np.int64)
    translation = np.asarray(translation, dtype=float)
    sites = basis.positions_frac
    images = sites @ rotation.T + translation
    difference = images[:, None, :] - sites[None, :, :]  # [n, m] = image of n minus site m
    distance = np.linalg.norm((difference - np.round(difference)) @ crystal.cell, axis=2)
    meets = distance < SITE_TOLERANCE_ANG
    if not meets.any(axis=1).all():
        worst = int(distance.min(axis=1).argmax())
        raise NotClosedError(
            f"the operation moves the site of {basis.labels[worst]} "
            f"{distance[worst].min():.3f} angstrom away from every site"
        )
    first = meets.argmax(axis=1)
    shifts = np.round(difference[np.arange(len(sites)), first]).astype(np.int64)
    cartesian = cartesian_rotation(rotation, crystal.cell)
    overlap = basis.harmonics @ harmonic_rotation(cartesian) @ basis.harmonics.T
    spin = basis.spinors.conj() @ spin_rotation(cartesian) @ basis.spinors.T
    same_shell = basis.shells[:, None] == basis.shells[None, :]
    matrix = np.where(meets.T & same_shell, overlap * spin, 0.0)
    defect = float(np.abs(matrix.conj().T @ matrix - np.eye(len(sites))).max())
    if defect > CLOSURE_TOLERANCE:
        raise NotClosedError(
            f"the declared orbitals are not closed under the operation (|M†M - 1| = {defect:.2g})"
        )
    return WannierOperator(rotation, translation, matrix, shifts, cells_on_site(sites, crystal))


def with_time_reversal(operator: WannierOperator, basis: OrbitalBasis) -> WannierOperator:
    """The product g Theta of a unitary operation with time reversal."""
    return replace(operator, matrix=operator.matrix @ time_reversal_matrix(basis), antiunitary=True)


def time_reversal_matrix(basis: OrbitalBasis) -> ComplexArray:
    """T of Theta|n R> = sum_m |m R> T[m, n] K, (n_orb, n_orb) unitary.

    Real harmonics are left alone. The spin of a spinful basis is turned over by i sigma_y; a basis
    without spin (every spinor (1, 0)) is real, T = 1.
    """
    if not np.any(basis.spinors[:, 1]):
        return np.eye(basis.n_orb, dtype=np.complex128)
    spin = basis.spinors.conj() @ I_SIGMA_Y @ basis.spinors.conj().T
    same_place = np.all(basis.positions_frac[:, None] == basis.positions_frac[None], axis=2)
    same_shell = basis.shells[:, None] == basis.shells[None, :]
    return np.where(same_place & same_shell, (basis.harmonics @ basis.harmonics.T) * spin, 0.0)


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
    proper = np.linalg.det(cartesian) * cartesian
    x, y, z, w = Rotation.from_matrix(proper).as_quat()
    leading = next((c for c in (w, x, y, z) if abs(c) > 1e-6), 1.0)
    x, y, z, w = np.sign(leading) * np.array([x, y, z, w])
    return np.array([[w - 1j * z, -1j * x - y], [-1j * x + y, w + 1j * z]])


def cells_on_site(sites_frac: FloatArray, crystal: Crystal) -> IntArray:
    """(n_orb, 3) cell of each function relative to the first one on the same site."""
    apart = sites_frac[:, None, :] - sites_frac[None, :, :]  # [m, n] = site m minus site n
    distance = np.linalg.norm((apart - np.round(apart)) @ crystal.cell, axis=2)
    first = (distance < SITE_TOLERANCE_ANG).argmax(axis=1)
    return np.asarray(np.round(apart[np.arange(len(apart)), first]), dtype=np.int64)


@dataclass(frozen=True, slots=True, eq=False)
class FactorSystem:
    """Products of operators against products of operations.

    Attributes
    ----------
    product
        (n_op, n_op) index of the operation g_a g_b.
    sign
        (n_op, n_op) +1 or -1 with D(g_a) D(g_b) = sign D(g_a g_b) up to lattice translations; all
        +1 without spin.
    defect
        Largest deviation of such a product from its operator.
    """

    product: IntArray
    sign: IntArray
    defect: float


def factor_system(operators: Sequence[WannierOperator]) -> FactorSystem:
    """Multiplication table of unitary operators, and how well the matrices obey it.

    D_a(b k) D_b(k) = s exp(-2 pi i k''.t) D_c(k), with t the lattice translation by which g_a g_b
    differs from g_c. Checked at one generic k.

    Raises
    ------
    NotClosedError
        A product is not among the operations.
    """
    k = np.array([[np.sqrt(2) - 1, np.sqrt(3) - 1, np.sqrt(5) - 2]])
    n_op = len(operators)
    rotations = np.array([o.rotation for o in operators])
    translations = np.array([o.translation for o in operators])
    at_k = np.concatenate([operator_at(o, k) for o in operators])
    product, sign, defect = np.empty((n_op, n_op), int), np.empty((n_op, n_op), int), 0.0
    for b, second in enumerate(operators):
        k_between: FloatArray = k @ second.k_rotation.astype(float)
        first_at = np.concatenate([operator_at(o, k_between) for o in operators])
        made = first_at @ at_k[b]
        rotation = rotations @ second.rotation
        translation = rotations @ second.translation + translations
        for a in range(n_op):
            c, cell = _find(rotation[a], translation[a], rotations, translations)
            k_end = k_between @ operators[a].k_rotation
            expected = np.exp(-2j * np.pi * float((k_end @ cell)[0])) * at_k[c]
            ratio = np.vdot(expected, made[a]).real
            product[a, b], sign[a, b] = c, int(np.sign(ratio))
            defect = max(defect, float(np.abs(made[a] - sign[a, b] * expected).max()))
    return FactorSystem(product, sign, defect)


def _find(
    rotation: IntArray, translation: FloatArray, rotations: IntArray, translations: FloatArray
) -> tuple[int, FloatArray]:
    """Index of {rotation|translation} modulo the lattice, and the lattice translation left over."""
    candidates = np.flatnonzero(np.all(rotations == rotation, axis=(1, 2)))
    for c in candidates:
        rest = translation - translations[c]
        if np.abs(rest - np.round(rest)).max() < 1e-3:
            return int(c), np.round(rest)
    raise NotClosedError("the operations are not closed under multiplication")
