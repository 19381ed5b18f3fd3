"""The parity witness: Fu-Kane indices and inversion indicators from the TRIM.

With time reversal and spin (-1)^nu0 is the product of delta(K) over the eight TRIM and (-1)^nu_i
that over the four with k_i = 1/2; delta(K) counts one parity per Kramers pair (Fu and Kane, Phys.
Rev. B 76, 045302 (2007), doi:10.1103/PhysRevB.76.045302). kappa = (1/4) sum_K (n+ - n-) modulo 4 is
the Z4 indicator, odd for a strong phase (Po, Vishwanath, Watanabe, Nat. Commun. 8, 50 (2017),
doi:10.1038/s41467-017-00133-2; Khalaf, Po, Vishwanath, Watanabe, Phys. Rev. X 8, 031070 (2018),
doi:10.1103/PhysRevX.8.031070). Without time reversal eta = sum_K n- modulo 4 (Hughes, Prodan,
Bernevig, Phys. Rev. B 83, 245132 (2011); Turner, Zhang, Mong, Vishwanath, Phys. Rev. B 85, 165120
(2012)).
"""

from __future__ import annotations

import itertools

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.invariants.results import ParityWitness, TrimParity
from topovet.model.fourier import BlochSum
from topovet.symmetry.inversion import inversion_at
from topovet.symmetry.results import InversionOperator
from topovet.symmetry.trim import trim_points
from topovet.units import MEV_PER_EV

MIN_GAP_EV = 1e-3
"""Least gap at a TRIM with which the occupied space is well defined."""

MIN_PURITY = 0.8
"""Least |parity| that is read as +1 or -1 (trials on noisy models: right in all cases above it)."""

PROBE_EV = 1e-6
"""Size of the inversion term that separates accidentally degenerate levels of opposite parity."""


def compute_parity(
    bloch: BlochSum,
    inversion: InversionOperator,
    filling: int,
    periodic: tuple[bool, bool, bool],
    *,
    kramers: bool,
) -> ParityWitness:
    """Parities of the occupied states at every TRIM, and the indices that follow.

    Inversion is restricted to the whole occupied space and then diagonalised, so that no choice of
    basis in a degenerate multiplet can change the answer.

    Parameters
    ----------
    bloch, inversion
        Hamiltonian and the inversion operator in the same basis.
    filling
        Occupied bands, spin counted.
    periodic
        Periodic directions; two of them give the 2D index.
    kramers
        Time reversal with spin: states come in Kramers pairs of equal parity.

    Returns
    -------
    ParityWitness
        status "failed" with the reason where a TRIM has no gap, states are impure, or the count
        contradicts Kramers pairing; the numbers at the TRIM are returned all the same.
    """
    k_trim = trim_points(periodic)
    h, p = bloch.at(k_trim), inversion_at(inversion, k_trim)
    x, y, z = (float(c) for c in inversion.centre_frac)
    trim = tuple(
        _trim_parity(k, h_k, p_k, filling, kramers)
        for k, h_k, p_k in zip(k_trim, h, p, strict=True)
    )
    reason = _why_not(trim, filling, kramers)
    if reason:
        return ParityWitness("failed", reason, None, None, None, None, (x, y, z), trim, ())
    balance = np.array([t.n_plus - t.n_minus for t in trim])
    in_3d = all(periodic)
    z2 = kappa = eta4 = None
    if kramers:
        z2 = _fu_kane(k_trim, np.array([t.delta for t in trim]), periodic)
        kappa = int(balance.sum()) // 4 if in_3d else None
    else:
        eta4 = int(sum(t.n_minus for t in trim)) % 4 if in_3d else None
    return ParityWitness(
        status="ok",
        reason="",
        z2=z2,
        z4=None if kappa is None else kappa % 4,
        kappa=kappa,
        eta4=eta4,
        centre=(x, y, z),
        trim=trim,
        kappa_by_centre=()
        if kappa is None
        else _kappa_by_centre(inversion.centre_frac, k_trim, balance),
    )


def indices_of_counts(
    k_trim: FloatArray, n_odd: IntArray, filling: int, periodic: tuple[bool, bool, bool]
) -> tuple[tuple[int, ...], int | None]:
    """Z2 indices, and Z4 in 3D, of a Kramers-paired insulator from its odd filled states.

    Parameters
    ----------
    k_trim
        (n_k, 3) the TRIM, all of them.
    n_odd
        (n_k,) odd filled states, spin counted; even numbers.
    filling, periodic
        As in `compute_parity`.
    """
    delta = np.where(np.asarray(n_odd) // 2 % 2, -1, 1)
    z4 = int((filling - 2 * np.asarray(n_odd)).sum()) // 4 % 4 if all(periodic) else None
    return _fu_kane(k_trim, delta, periodic), z4


def _trim_parity(
    k: FloatArray, h: ComplexArray, p: ComplexArray, filling: int, kramers: bool
) -> TrimParity:
    energies, states = np.linalg.eigh(h)
    occupied = states[:, :filling]
    eigenvalues = np.linalg.eigvalsh(occupied.conj().T @ p @ occupied)
    n_minus = int((eigenvalues < 0).sum())
    violation = float(np.linalg.norm(p @ h @ p.conj().T - h, ord=2))
    level_energies, level_parities = _levels(h, p, 2 if kramers else 1)
    x, y, z = (float(c) for c in k)
    return TrimParity(
        k=(x, y, z),
        n_plus=filling - n_minus,
        n_minus=n_minus,
        delta=(-1) ** (n_minus // 2 if kramers else n_minus),
        purity=float(np.abs(eigenvalues).min()),
        gap_ev=float(energies[filling] - energies[filling - 1]),
        violation_mev=MEV_PER_EV * violation,
        level_energies_ev=level_energies,
        level_parities=level_parities,
    )


def _levels(
    h: ComplexArray, p: ComplexArray, size: int
) -> tuple[tuple[float, ...], tuple[float, ...]]:
    """Energy and parity of each level of `size` bands, for display; all bands of the model."""
    energies, states = np.linalg.eigh(h + PROBE_EV * p)
    parity = np.real(np.einsum("ib,ij,jb->b", states.conj(), p, states, optimize=True))
    n = len(energies) // size * size
    return (
        tuple(float(e) for e in energies[:n].reshape(-1, size).mean(axis=1)),
        tuple(float(q) for q in parity[:n].reshape(-1, size).mean(axis=1)),
    )


def _why_not(trim: tuple[TrimParity, ...], filling: int, kramers: bool) -> str:
    """Why the parities cannot be read, in one clause; empty if they can."""
    if kramers and filling % 2:
        return f"filling {filling} is odd, which Kramers pairs do not allow in an insulator"
    narrow = min(trim, key=lambda t: t.gap_ev)
    if narrow.gap_ev < MIN_GAP_EV:
        return (
            f"the gap at {_point(narrow.k)} is {MEV_PER_EV * narrow.gap_ev:.3g} meV, at least "
            f"{MEV_PER_EV * MIN_GAP_EV:g} meV needed at filling {filling}"
        )
    impure = min(trim, key=lambda t: t.purity)
    if impure.purity < MIN_PURITY:
        return (
            f"occupied states at {_point(impure.k)} have no definite parity "
            f"(|parity| down to {impure.purity:.2f}, at least {MIN_PURITY} needed)"
        )
    odd = [t for t in trim if kramers and t.n_minus % 2]
    if odd:
        return f"{odd[0].n_minus} odd states at {_point(odd[0].k)}: not a whole number of pairs"
    return ""


def _fu_kane(
    k_trim: FloatArray, delta: IntArray, periodic: tuple[bool, bool, bool]
) -> tuple[int, ...]:
    """(nu0; nu1 nu2 nu3), or (nu,) in 2D."""
    strong = _index(delta)
    if not all(periodic):
        return (strong,)
    return (strong, *(_index(delta[k_trim[:, axis] == 0.5]) for axis in range(3)))


def _index(signs: IntArray) -> int:
    return int(np.prod(signs) < 0)


def _kappa_by_centre(
    centre: FloatArray, k_trim: FloatArray, balance: IntArray
) -> tuple[tuple[tuple[float, float, float], int], ...]:
    """kappa mod 4 about centre + t/2, t a lattice vector: parities turn by (-1)^(2K.t)."""
    found = []
    for t in itertools.product((0, 1), repeat=3):
        sign = (-1) ** np.round(2 * k_trim @ np.array(t)).astype(int)
        x, y, z = ((centre + np.array(t) / 2) % 1.0).tolist()
        found.append(((x, y, z), int((sign * balance).sum()) // 4 % 4))
    return tuple(found)


def _point(k: tuple[float, float, float]) -> str:
    return "TRIM (" + ", ".join("1/2" if c == 0.5 else "0" for c in k) + ")"
