"""Time reversal, tested on the Hamiltonian in both spin orders.

Theta = U K. For spinors with real spatial orbitals U = i sigma_y on the spin, and Theta H(R)
Theta^-1 = U H(R)* U†; without spin U = 1. Wannier90 writes up and down of each orbital next to each
other ("interlaced"); some interfaces write all up, then all down ("block").
"""

from __future__ import annotations

import numpy as np
from scipy.sparse.csgraph import connected_components

from topovet.arrays import ComplexArray, FloatArray, largest_spectral_norm
from topovet.model.fourier import BlochSum
from topovet.model.hamiltonian import TightBindingModel
from topovet.symmetry.results import SpinOrder, TimeReversalTest
from topovet.symmetry.trim import sample_points, trim_points
from topovet.units import MEV_PER_EV

TOLERANCE_MEV = 1.0
"""Largest violation of H(k) with which time reversal counts as present (practice: Wannier90 output
of non-magnetic runs keeps it to a few micro-eV; magnetism worth the name breaks it by far more)."""

I_SIGMA_Y = np.array([[0.0, 1.0], [-1.0, 0.0]])


def spin_operator(n_orb: int, spin_order: str) -> FloatArray:
    """U of time reversal, (n_orb, n_orb) real, for "interlaced", "block" or "none"."""
    if spin_order == "none":
        return np.eye(n_orb)
    half = np.eye(n_orb // 2)
    if spin_order == "interlaced":
        return np.kron(half, I_SIGMA_Y)
    if spin_order == "block":
        return np.kron(I_SIGMA_Y, half)
    raise ValueError(f"unknown spin order {spin_order!r}")


def find_spin_order(
    bloch: BlochSum, periodic: tuple[bool, bool, bool], *, spinful: bool
) -> SpinOrder:
    """Spin order of a Hamiltonian: the one in which time reversal holds.

    "interlaced", Wannier90's own, stays unless "block" is better by a factor of ten. A Hamiltonian
    that is declared spinless stays so, but both orders are measured: if time reversal fails for it
    and holds with spin, the declaration is wrong. Where neither order has time reversal, up and
    down may be interchanged in some orbitals only; which, the Hamiltonian says itself.

    Parameters
    ----------
    bloch
        The Hamiltonian as the file orders it, read without shifts: these may rest on an assumed
        order.
    periodic
        Periodic directions.
    spinful
        As declared.
    """
    k_frac = sampled_k(periodic)
    h_k, h_minus = bloch.at(k_frac), bloch.at(-k_frac)
    spinless = _violation_mev(h_k, h_minus, "none")
    if bloch.n_orb % 2:
        return SpinOrder("interlaced" if spinful else "none", None, None, spinless)
    interlaced = _violation_mev(h_k, h_minus, "interlaced")
    block = _violation_mev(h_k, h_minus, "block")
    found = "block" if block < 0.1 * interlaced else "interlaced"
    if not spinful or min(interlaced, block) <= TOLERANCE_MEV:
        return SpinOrder(found if spinful else "none", interlaced, block, spinless)
    signs = _pair_signs(h_k, h_minus)
    swapped = _violation_mev(h_k, h_minus, "interlaced", signs)
    pairs = tuple(int(i) for i in np.flatnonzero(signs < 0))
    return SpinOrder(found, interlaced, block, spinless, pairs, swapped)


def _pair_signs(h_k: ComplexArray, h_minus: ComplexArray) -> FloatArray:
    """(n_orb / 2,) signs s with which Theta H(k) Theta^-1 and H(-k) agree best, mostly +1.

    Up and down of an orbital interchanged, like a sign of one of them, turn its block i sigma_y of
    Theta into -i sigma_y. The block of orbitals i, j of Theta H(k) Theta^-1 is then s_i s_j times
    that of H(-k), and s is the leading eigenvector of their overlaps, coupled set by coupled set.
    """
    n = h_k.shape[1] // 2
    u = spin_operator(2 * n, "interlaced")
    product = (u @ h_k.conj() @ u.T) * h_minus.conj()
    overlap = product.real.sum(axis=0).reshape(n, 2, n, 2).sum(axis=(1, 3))
    overlap = 0.5 * (overlap + overlap.T)
    np.fill_diagonal(overlap, 0.0)
    coupled = np.abs(overlap) > 1e-6 * np.abs(overlap).max(initial=0.0)
    signs = np.ones(n)
    n_sets, member = connected_components(coupled)
    for i in range(n_sets):
        rows = np.flatnonzero(member == i)
        leading = np.linalg.eigh(overlap[np.ix_(rows, rows)])[1][:, -1]
        chosen = np.where(leading < 0, -1.0, 1.0)
        signs[rows] = chosen if chosen.sum() >= 0 else -chosen
    return signs


def measure_time_reversal(
    model: TightBindingModel,
    bloch: BlochSum,
    periodic: tuple[bool, bool, bool],
    *,
    unshifted: BlochSum | None = None,
    tolerance_mev: float = TOLERANCE_MEV,
) -> TimeReversalTest:
    """Violation of time reversal in meV, and Kramers splitting.

    Parameters
    ----------
    model, bloch
        The same Hamiltonian in real space and as a Fourier sum; spinors interlaced.
    periodic
        Periodic directions, which fix the TRIM.
    unshifted
        The Hamiltonian read without `use_ws_distance` shifts, where shifts were applied: it decides
        whether time reversal is present, since the shifts can only spoil it.
    tolerance_mev
        Largest violation with which time reversal counts as present.
    """
    if model.spinful and model.n_orb % 2:  # one spinor component has no Kramers partner
        return TimeReversalTest(False, np.inf, np.inf, None, None, None, tolerance_mev)
    order = "interlaced" if model.spinful else "none"
    k_frac = sampled_k(periodic)
    h_k = bloch.at(k_frac)
    violation = _violation_mev(h_k, bloch.at(-k_frac), order)
    before = None
    if unshifted is not None:
        before = _violation_mev(unshifted.at(k_frac), unshifted.at(-k_frac), order)
    n_trim = len(trim_points(periodic))
    return TimeReversalTest(
        present=(violation if before is None else before) <= tolerance_mev,
        violation_mev=violation,
        violation_r_mev=_violation_mev(model.h_r, model.h_r, order),
        violation_unshifted_mev=before,
        kramers_splitting_mev=_kramers_splitting_mev(h_k[:n_trim]) if model.spinful else None,
        spin_mixing_mev=_spin_mixing_mev(model) if model.spinful else None,
        tolerance_mev=tolerance_mev,
    )


def sampled_k(periodic: tuple[bool, bool, bool]) -> FloatArray:
    """The TRIM, then the generic points, on which violations are measured."""
    return np.concatenate([trim_points(periodic), sample_points(periodic)])


def infer_spin(bloch: BlochSum) -> bool | None:
    """Whether H is spinful, from time reversal alone; None where both readings hold or neither.

    For cases without a `.win` file: only a spinful Hamiltonian satisfies U H* U† = H with U^2 = -1
    and is not real.
    """
    k_frac = sample_points((True, True, True))
    h_k, h_minus = bloch.at(k_frac), bloch.at(-k_frac)
    spinless = _violation_mev(h_k, h_minus, "none") <= TOLERANCE_MEV
    spinful = bloch.n_orb % 2 == 0 and any(
        _violation_mev(h_k, h_minus, order) <= TOLERANCE_MEV for order in ("interlaced", "block")
    )
    return spinful if spinless != spinful else None


def _violation_mev(
    h: ComplexArray, h_reversed: ComplexArray, spin_order: str, signs: FloatArray | None = None
) -> float:
    u = spin_operator(h.shape[1], spin_order)
    if signs is not None:
        u = np.repeat(signs, 2)[:, None] * u
    return MEV_PER_EV * largest_spectral_norm(u @ h.conj() @ u.T - h_reversed)


def _kramers_splitting_mev(h_trim: ComplexArray) -> float:
    energies = np.linalg.eigvalsh(h_trim)
    return MEV_PER_EV * float(np.abs(energies[:, 1::2] - energies[:, ::2]).max())


def _spin_mixing_mev(model: TightBindingModel) -> float:
    h = model.h_r
    flips = np.abs(h[:, 0::2, 1::2]).max()
    splits = np.abs(h[:, 0::2, 0::2] - h[:, 1::2, 1::2]).max()
    return MEV_PER_EV * float(flips + splits)
