"""The part of a Hamiltonian that depends on spin: what spin-orbit coupling does to it.

Between two orbitals H has a 2 x 2 block h0 + h.sigma. The spin-independent part h0 is kept; of
h.sigma the part that time reversal leaves alone is spin-orbit coupling, and what it turns over
(exchange fields of a magnet) is kept too:

    H(s) = H - (1 - s) V,   V = (W + Theta W Theta^-1) / 2,   W = h.sigma.

V is a good stand-in for spin-orbit coupling where the Wannier functions are products of a real
orbital and a spin. Two things are left out: the spin-independent (scalar-relativistic) part, which
is in h0, and how the orbitals themselves change with the coupling. Where the functions are not
products V also holds ordinary hopping; `spin_purity` tells.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, ComplexArray
from topovet.model.basis import OrbitalBasis
from topovet.model.fourier import BlochSum, mapped_sum
from topovet.model.hamiltonian import TightBindingModel

SAME_FRAME = 1e-9
"""Spin frames of two orbitals that differ by less are the same."""

Frame = ComplexArray | None
"""(n_orb, n_orb) unitary that brings the spins of all orbitals to one axis; None where they are."""

_I_SIGMA_Y = np.array([[0.0, 1.0], [-1.0, 0.0]])


def spin_frame(basis: OrbitalBasis | None) -> Frame:
    """What brings the declared spinors to one quantisation axis; None where nothing is needed."""
    if basis is None:
        return None
    pairs = np.asarray(basis.spinors).reshape(-1, 2, 2).transpose(0, 2, 1)  # columns up, down
    if np.abs(pairs - pairs[0]).max(initial=0.0) < SAME_FRAME:
        return None
    n = len(pairs)
    frame = np.zeros((n, 2, n, 2), dtype=np.complex128)
    frame[np.arange(n), :, np.arange(n), :] = pairs
    return frame.reshape(2 * n, 2 * n)


def spin_dependent(h: ComplexArray, frame: Frame = None) -> ComplexArray:
    """h.sigma of matrices (..., n_orb, n_orb) whose functions come in pairs up, down."""
    turned = h if frame is None else frame @ h @ frame.conj().T
    *some, n, _ = turned.shape
    rest = np.array(turned, dtype=np.complex128).reshape(*some, n // 2, 2, n // 2, 2)
    mean = 0.5 * (rest[..., 0, :, 0] + rest[..., 1, :, 1])
    rest[..., 0, :, 0] -= mean
    rest[..., 1, :, 1] -= mean
    part = rest.reshape(*some, n, n)
    return part if frame is None else np.asarray(frame.conj().T @ part @ frame)


def reversed_in_time(h: ComplexArray) -> ComplexArray:
    """U h* U† with U = 1 x i sigma_y: Theta h Theta^-1 for a block H(R), or H(K) at a TRIM."""
    u = np.kron(np.eye(h.shape[-1] // 2), _I_SIGMA_Y)
    return np.asarray(u @ h.conj() @ u.T)


def spin_orbit_at_trim(h_trim: ComplexArray, frame: Frame = None) -> ComplexArray:
    """V at TRIM, from H there, (n_k, n_orb, n_orb) eV."""
    part = spin_dependent(h_trim, frame)
    return np.asarray(0.5 * (part + reversed_in_time(part)))


def spin_orbit_sum(bloch: BlochSum, frame: Frame = None) -> BlochSum:
    """V(k) as a Fourier sum on the R vectors of H.

    The sum holds S(R) = H(R) + H(R)† and D(R) = i (H(R) - H(R)†): taking a part commutes with
    both, and time reversal takes H(R) to U H(R)* U†, hence S to U S* U† and D to -U D* U†.
    """

    def even(block: ComplexArray, sign: float) -> ComplexArray:
        part = spin_dependent(block, frame)
        return np.asarray(0.5 * (part + sign * reversed_in_time(part)))

    return mapped_sum(bloch, lambda s: even(s, 1.0), lambda d: even(d, -1.0))


@dataclass(frozen=True, slots=True)
class SpinPurity:
    """How far the functions are products of an orbital and a spin.

    Attributes
    ----------
    onsite_ev
        Spectral norm of the spin-dependent part within the sites of a cell, eV: the atomic
        spin-orbit coupling.
    largest_ev
        Largest element of the spin-dependent part, on or between sites, eV.
    hopping_ratio
        Spin-dependent over spin-independent hopping, root mean square over all R and pairs of
        sites. Spin-orbit coupling is nearly all on the atoms; functions that mix the spins have
        ordinary hopping in both parts.
    """

    onsite_ev: float
    largest_ev: float
    hopping_ratio: float


def spin_purity(model: TightBindingModel, same_site: BoolArray, frame: Frame = None) -> SpinPurity:
    """Where the spin-dependent part sits.

    Parameters
    ----------
    model
        Spinful, pairs up, down next to each other.
    same_site
        (n_orb, n_orb) pairs of functions on one site; their elements at R = 0 are no hopping.
    frame
        From `spin_frame`.
    """
    dependent = whole = onsite = largest = 0.0
    for r_cell, h in zip(model.r_cells, model.h_r, strict=True):
        part = spin_dependent(h, frame)
        hops = np.ones_like(same_site)
        if not r_cell.any():
            hops = ~same_site
            onsite = float(np.linalg.norm(np.where(same_site, part, 0.0), ord=2))
        largest = max(largest, float(np.abs(part).max()))
        dependent += float((np.abs(part) ** 2)[hops].sum())
        whole += float((np.abs(h) ** 2)[hops].sum())
    independent = whole - dependent  # the two parts are orthogonal, also over the pairs of a site
    ratio = np.sqrt(dependent / independent) if independent > 0 else np.inf
    return SpinPurity(onsite, largest, float(ratio))
