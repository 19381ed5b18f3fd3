"""Inversion on the Wannier functions, built from their declared sites and harmonics.

A function n at tau_n goes to 2c - tau_n = tau_m + L_n - C_m and is multiplied by (-1)^l; spin is
left alone. C_m is the cell of m as counted from the first function on its site: functions of one
site may be listed in different cells.

    P|n R> = sum_m |m, L_n - C_m - R> M[m, n],
    D(k)[m, n] = exp(-2 pi i k.C_m) M[m, n] exp(2 pi i k.L_n),
    D(k) H(k) D(k)† = H(-k)                     in the periodic gauge.

At a TRIM D(K)^2 = 1, and D(K) commutes with H(K).
"""

from __future__ import annotations

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray, largest_spectral_norm
from topovet.errors import NoInversionError
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.model.hamiltonian import TightBindingModel, r_index
from topovet.model.real_harmonics import HARMONIC_L
from topovet.symmetry.results import InversionOperator, InversionTest
from topovet.symmetry.trim import sample_points, trim_points
from topovet.units import MEV_PER_EV

SITE_TOLERANCE_ANG = 0.05
"""How far the image of a site may be from a site; structure files come with few digits."""

CLOSURE_TOLERANCE = 1e-6
"""Largest |M†M - 1| with which the declared orbitals count as closed under inversion."""


def build_inversion(
    basis: OrbitalBasis, crystal: Crystal, centre_frac: FloatArray
) -> InversionOperator:
    """Inversion about a centre, in the declared basis.

    Parameters
    ----------
    basis
        Declared Wannier functions, in the Hamiltonian's order.
    crystal
        Gives the cell in which site distances are measured.
    centre_frac
        (3,) fixed point, fractional.

    Raises
    ------
    NoInversionError
        A site has no image, or the orbitals are not closed (e.g. a lone sp hybrid).
    """
    sites = basis.positions_frac
    images = 2 * np.asarray(centre_frac, dtype=float) - sites
    difference = images[:, None, :] - sites[None, :, :]  # [n, m] = image of n minus site m
    distance = np.linalg.norm((difference - np.round(difference)) @ crystal.cell, axis=2)
    meets = distance < SITE_TOLERANCE_ANG
    if not meets.any(axis=1).all():
        worst = int(distance.min(axis=1).argmax())
        raise NoInversionError(
            f"inversion about {_point(centre_frac)} moves the site of {basis.labels[worst]} "
            f"{distance[worst].min():.3f} angstrom away from every site"
        )
    first = meets.argmax(axis=1)
    shifts = np.round(difference[np.arange(len(sites)), first]).astype(np.int64)
    homes = _cell_on_site(sites, crystal)
    parity = (-1.0) ** HARMONIC_L
    overlap = (basis.harmonics * parity) @ basis.harmonics.T
    same_shell = basis.shells[:, None] == basis.shells[None, :]
    spin = basis.spinors.conj() @ basis.spinors.T
    matrix = np.where(meets.T & same_shell, overlap * spin, 0.0)
    defect = float(np.abs(matrix.conj().T @ matrix - np.eye(len(sites))).max())
    if defect > CLOSURE_TOLERANCE:
        raise NoInversionError(
            f"the declared orbitals are not closed under inversion about {_point(centre_frac)} "
            f"(|M†M - 1| = {defect:.2g})"
        )
    return InversionOperator(np.asarray(centre_frac, dtype=float), matrix, shifts, homes)


def _cell_on_site(sites: FloatArray, crystal: Crystal) -> IntArray:
    """(n_orb, 3) cell of each function relative to the first one on the same site."""
    apart = sites[:, None, :] - sites[None, :, :]  # [m, n] = site m minus site n
    distance = np.linalg.norm((apart - np.round(apart)) @ crystal.cell, axis=2)
    first = (distance < SITE_TOLERANCE_ANG).argmax(axis=1)
    return np.asarray(np.round(apart[np.arange(len(sites)), first]), dtype=np.int64)


def inversion_at(operator: InversionOperator, k_frac: FloatArray) -> ComplexArray:
    """D(k), (n_k, n_orb, n_orb), for k_frac (n_k, 3)."""
    k_frac = np.asarray(k_frac, dtype=float)
    before = np.exp(2j * np.pi * (k_frac @ operator.shifts.T))
    after = np.exp(-2j * np.pi * (k_frac @ operator.homes.T))
    return np.asarray(after[:, :, None] * operator.matrix * before[:, None, :])


def inversion_residual(
    bloch: BlochSum, operator: InversionOperator, k_frac: FloatArray
) -> ComplexArray:
    """D(k) H(k) D(k)† - H(-k), (n_k, n_orb, n_orb) eV."""
    d = inversion_at(operator, k_frac)
    rotated = d @ bloch.at(k_frac) @ d.conj().transpose(0, 2, 1)
    return np.asarray(rotated - bloch.at(-np.asarray(k_frac)))


def inverted_hopping(
    model: TightBindingModel, operator: InversionOperator
) -> tuple[IntArray, ComplexArray]:
    """P H P^-1 in real space on its own list of R: (n, 3) and (n, n_orb, n_orb) eV.

    Element (m, n) of H(R) moves to R' = -(R + L_m - L_n), M mixes the orbitals, and element (m, n)
    of what results moves on to R' + C_m - C_n.
    """
    m = operator.matrix
    r_moved, moved = moved_hopping(model.r_cells, model.h_r, operator.shifts)
    return moved_hopping(-r_moved, np.asarray(m @ moved @ m.conj().T), operator.homes)


def moved_hopping(
    r_cells: IntArray, h_r: ComplexArray, cell_of: IntArray
) -> tuple[IntArray, ComplexArray]:
    """Element (m, n) of each H(R) moved to R + c_m - c_n, on its own list of R.

    Parameters
    ----------
    r_cells, h_r
        (n_r, 3) integers and (n_r, n_orb, n_orb) eV.
    cell_of
        (n_orb, 3) integer vector c of each function.
    """
    cells, which = np.unique(cell_of, axis=0, return_inverse=True)
    which = which.reshape(-1)
    moves = (cells[:, None, :] - cells[None, :, :]).reshape(-1, 3)
    targets = r_cells[:, None, :] + moves[None, :, :]
    r_new = np.unique(targets.reshape(-1, 3), axis=0)
    h_new = np.zeros((len(r_new), *h_r.shape[1:]), dtype=np.complex128)
    for u in range(len(cells)):
        for v in range(len(cells)):
            at = r_index(r_new, targets[:, u * len(cells) + v])
            rows, columns = np.nonzero(which == u)[0], np.nonzero(which == v)[0]
            h_new[at[:, None, None], rows[:, None], columns] = h_r[:, rows[:, None], columns]
    return r_new, h_new


def real_space_residual_mev(model: TightBindingModel, operator: InversionOperator) -> float:
    """Spectral norm of (P H P^-1 - H)(R), largest over R, meV."""
    r_new, h_new = inverted_hopping(model, operator)
    at = r_index(r_new, model.r_cells)
    h_new[at[at >= 0]] -= model.h_r[at >= 0]
    lost = largest_spectral_norm(model.h_r[at < 0])
    return MEV_PER_EV * max(largest_spectral_norm(h_new), lost)


def measure_inversion(
    model: TightBindingModel,
    bloch: BlochSum,
    operator: InversionOperator,
    periodic: tuple[bool, bool, bool],
) -> InversionTest:
    """Residual of inversion in meV: over generic k, at the TRIM, and over R."""
    trim, generic = trim_points(periodic), sample_points(periodic)
    at_trim = largest_spectral_norm(inversion_residual(bloch, operator, trim))
    at_generic = largest_spectral_norm(inversion_residual(bloch, operator, generic))
    x, y, z = (float(c) for c in operator.centre_frac)
    return InversionTest(
        present=True,
        reason="",
        centre=(x, y, z),
        basis="declared",
        violation_mev=MEV_PER_EV * max(at_trim, at_generic),
        violation_r_mev=real_space_residual_mev(model, operator),
        violation_trim_mev=MEV_PER_EV * at_trim,
        n_k=len(trim) + len(generic),
    )


def no_inversion(reason: str) -> InversionTest:
    """The result where inversion is absent or cannot be built, with the reason."""
    return InversionTest(False, reason, None, "none", None, None, None, 0)


def _point(centre_frac: FloatArray) -> str:
    return "(" + ", ".join(f"{c:g}" for c in np.asarray(centre_frac)) + ")"
