"""Time reversal, tested on the Hamiltonian in both spin orders.

Theta = U K. For spinors with real spatial orbitals U = i sigma_y on the spin, and Theta H(R)
Theta^-1 = U H(R)* U†; without spin U = 1. Wannier90 writes up and down of each orbital next to each
other ("interlaced"); some interfaces write all up, then all down ("block").
"""

from __future__ import annotations

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray, largest_spectral_norm
from topovet.model.fourier import BlochSum
from topovet.model.hamiltonian import TightBindingModel
from topovet.symmetry.results import TimeReversalTest
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


def interlacing_order(n_orb: int) -> IntArray:
    """Index that turns block order into interlaced order: new[i] = old[order[i]]."""
    return np.asarray(np.arange(n_orb).reshape(2, -1).T.reshape(-1))


def measure_time_reversal(
    model: TightBindingModel,
    bloch: BlochSum,
    periodic: tuple[bool, bool, bool],
    *,
    unshifted: BlochSum | None = None,
    tolerance_mev: float = TOLERANCE_MEV,
) -> TimeReversalTest:
    """Violation of time reversal in meV, spin order, Kramers splitting.

    Parameters
    ----------
    model, bloch
        The same Hamiltonian in real space and as a Fourier sum.
    periodic
        Periodic directions, which fix the TRIM.
    unshifted
        The Hamiltonian read without `use_ws_distance` shifts, where shifts were applied: it decides
        whether time reversal is present, since the shifts can only spoil it.
    tolerance_mev
        Largest violation with which time reversal counts as present.
    """
    trim = trim_points(periodic)
    k_frac = np.concatenate([trim, sample_points(periodic)])
    h_k, h_minus = bloch.at(k_frac), bloch.at(-k_frac)
    if model.spinful and model.n_orb % 2:  # one spinor component has no Kramers partner
        return _without_partner(tolerance_mev)
    order, other = _spin_order(h_k, h_minus) if model.spinful else ("none", None)
    violation = _violation_mev(h_k, h_minus, order)
    before = None
    if unshifted is not None:
        before = _violation_mev(unshifted.at(k_frac), unshifted.at(-k_frac), order)
    return TimeReversalTest(
        present=(violation if before is None else before) <= tolerance_mev,
        spin_order=order,
        violation_mev=violation,
        violation_r_mev=_violation_mev(model.h_r, model.h_r, order),
        violation_unshifted_mev=before,
        other_order_mev=None if other is None else _violation_mev(h_k, h_minus, other),
        kramers_splitting_mev=_kramers_splitting_mev(h_k[: len(trim)]) if model.spinful else None,
        spin_mixing_mev=_spin_mixing_mev(model, order) if model.spinful else None,
        tolerance_mev=tolerance_mev,
    )


def _spin_order(h: ComplexArray, h_reversed: ComplexArray) -> tuple[str, str]:
    """The order that fits, then the other one; "interlaced" unless "block" is clearly better."""
    interlaced = _violation_mev(h, h_reversed, "interlaced")
    block = _violation_mev(h, h_reversed, "block")
    return ("block", "interlaced") if block < 0.1 * interlaced else ("interlaced", "block")


def _without_partner(tolerance_mev: float) -> TimeReversalTest:
    return TimeReversalTest(
        present=False,
        spin_order="interlaced",
        violation_mev=np.inf,
        violation_r_mev=np.inf,
        violation_unshifted_mev=None,
        other_order_mev=None,
        kramers_splitting_mev=None,
        spin_mixing_mev=None,
        tolerance_mev=tolerance_mev,
    )


def infer_spin(model: TightBindingModel, bloch: BlochSum) -> bool | None:
    """Whether H is spinful, from time reversal alone; None where both readings hold or neither.

    For cases without a `.win` file: only a spinful Hamiltonian satisfies U H* U† = H with U^2 = -1
    and is not real.
    """
    k_frac = sample_points((True, True, True))
    h_k, h_minus = bloch.at(k_frac), bloch.at(-k_frac)
    spinless = _violation_mev(h_k, h_minus, "none") <= TOLERANCE_MEV
    spinful = model.n_orb % 2 == 0 and any(
        _violation_mev(h_k, h_minus, order) <= TOLERANCE_MEV for order in ("interlaced", "block")
    )
    return spinful if spinless != spinful else None


def _violation_mev(h: ComplexArray, h_reversed: ComplexArray, spin_order: str) -> float:
    u = spin_operator(h.shape[1], spin_order)
    return MEV_PER_EV * largest_spectral_norm(u @ h.conj() @ u.T - h_reversed)


def _kramers_splitting_mev(h_trim: ComplexArray) -> float:
    energies = np.linalg.eigvalsh(h_trim)
    return MEV_PER_EV * float(np.abs(energies[:, 1::2] - energies[:, ::2]).max())


def _spin_mixing_mev(model: TightBindingModel, spin_order: str) -> float:
    n = model.n_orb
    order = np.arange(n) if spin_order == "interlaced" else interlacing_order(n)
    up, down = order[0::2], order[1::2]
    h = model.h_r
    flips = np.abs(h[:, up[:, None], down[None, :]]).max()
    splits = np.abs(h[:, up[:, None], up[None, :]] - h[:, down[:, None], down[None, :]]).max()
    return MEV_PER_EV * float(flips + splits)
