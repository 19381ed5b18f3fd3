"""The Wilson-Dirac lattice model in three dimensions, and what is made of it.

The model starts from states of definite j; it is embedded in whole s and p shells, so that its
basis is declared as completely as that of a first-principles case.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from topovet.demo.lattice import (
    HARMONICS,
    SIGMA,
    LatticeModel,
    Terms,
    angular_momentum,
    build_basis,
    l_dot_sigma,
    with_onsite,
)
from topovet.model.crystal import Crystal


def wilson_dirac(*, m: float, a: float = 1.0, c: float = 1.0, zeeman: float = 0.0) -> LatticeModel:
    """The Wilson-Dirac lattice model in three dimensions; s and p orbitals, filling 2.

        h(k) = a sum_i sin k_i Gamma^i + (m + c sum_i cos k_i) Gamma^0,
        Gamma^0 = tau_z, Gamma^i = tau_x sigma_i, P = tau_z, Theta = i sigma_y K.

    The mass at a TRIM with n components at pi is m + (3 - 2n) c, so with c > 0 the gap closes at
    m/c = -3 (Gamma), -1 (three X), 1 (three M), 3 (R): indices 0;(000) below -3, then 1;(000),
    0;(111), 1;(111), and 0;(000) above 3, by Fu and Kane's products.

    The pair is s and p of j = 1/2, cut out of the p shell by (1 - L.sigma)/3; its states are
    sum_i p_i sigma_i |spin>/sqrt(3), which makes real s-p hopping v = a sqrt(3)/2 the
    sin k.sigma of the model. p of j = 3/2 sits at one flat energy far above. `zeeman` adds
    1 x sigma_z to the Dirac matrices, i.e. 2 J_z: inversion stays, time reversal is broken.

    References
    ----------
    Qi, Hughes, Zhang, PRB 78, 195424 (2008), doi:10.1103/PhysRevB.78.195424 (the lattice Dirac
    model, there in 4 and by reduction in 3 dimensions). Indices: Fu, Kane, PRB 76, 045302 (2007),
    doi:10.1103/PhysRevB.76.045302, Eqs. 3.26 and 3.27 (numbers from memory).
    """
    terms = Terms(8)
    s, p = slice(0, 2), slice(2, 8)
    axes = (2, 0, 1)  # p orbitals in the order z, x, y
    l_sigma = l_dot_sigma(axes)
    two_j_z = 2 * np.kron(angular_momentum(2, axes), np.eye(2)) + np.kron(np.eye(3), SIGMA[2])
    near = (np.eye(6) - l_sigma) / 3
    far_ev = abs(m) + 3 * abs(c) + 3 * abs(a) + 2 * abs(zeeman) + 5.0
    terms.add_onsite(s, m * np.eye(2) + zeeman * SIGMA[2])
    terms.add_onsite(p, near @ (-m * np.eye(6) + zeeman * two_j_z) + far_ev * (np.eye(6) - near))
    for axis in range(3):
        r_cell = np.eye(3, dtype=int)[axis]
        terms.add(r_cell, s, s, 0.5 * c * np.eye(2))
        terms.add(r_cell, p, p, -0.5 * c * near)
        orbital = np.eye(3)[axes.index(axis)]
        s_to_p = np.kron(orbital, np.eye(2)) @ near * a * np.sqrt(3) / 2
        terms.add(r_cell, s, p, s_to_p)
        terms.add(r_cell, p, s, -s_to_p.conj().T)
    r_cells, h_r = terms.arrays()
    position = (0.0, 0.0, 0.0)
    basis = build_basis([("Bi1", position, name) for name in HARMONICS])
    crystal = Crystal(3.8 * np.eye(3), ("Bi",), np.array([position]))
    return LatticeModel("wilson_dirac", crystal, basis, r_cells, h_r, 2, True, position)


def double_wilson_dirac(
    *, m: tuple[float, float] = (-2.0, -1.7), coupling: float = 0.3
) -> LatticeModel:
    """Two strong topological insulators on the same lattice, coupled: all Z2 trivial, kappa = 2.

    References
    ----------
    Z2 indices add up modulo 2, the inversion indicator modulo 4: Khalaf, Po, Vishwanath, Watanabe,
    PRX 8, 031070 (2018), doi:10.1103/PhysRevX.8.031070. Phases of one copy: see `wilson_dirac`.
    """
    one, other = (wilson_dirac(m=mass) for mass in m)
    n = one.n_orb
    h_r = np.zeros((len(one.h_r), 2 * n, 2 * n), dtype=complex)
    h_r[:, :n, :n], h_r[:, n:, n:] = one.h_r, other.h_r
    home = np.flatnonzero(~one.r_cells.any(axis=1))[0]
    h_r[home, :n, n:] = h_r[home, n:, :n] = coupling * np.eye(n)
    names = ("s", "pz", "px", "py")
    basis = build_basis([("Bi1", (0.0, 0.0, 0.0), name) for _ in (0, 1) for name in names])
    shells = np.repeat([1, 2], n)
    return replace(
        one,
        name="double_wilson_dirac",
        basis=replace(basis, shells=shells),
        h_r=h_r,
        filling=2 * one.filling,
    )


def chiral_wilson_dirac(*, m: float, u: float) -> LatticeModel:
    """Wilson-Dirac with on-site coupling i u of s and sum_i p_i sigma_i: no inversion, no mirror.

    Time reversal takes sigma to -sigma and i to -i, so it holds. With |u| small beside the gap the
    indices are those of u = 0, by continuity.
    """
    model = wilson_dirac(m=m)
    block = np.concatenate([SIGMA[2], SIGMA[0], SIGMA[1]], axis=1) / np.sqrt(3)  # pz, px, py
    onsite = np.zeros((8, 8), dtype=complex)
    onsite[:2, 2:] = 1j * u * block
    onsite[2:, :2] = -1j * u * block.conj().T
    return with_onsite(replace(model, name="chiral_wilson_dirac"), onsite)
