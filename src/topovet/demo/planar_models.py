"""Two-dimensional models of the literature, each with known indices.

Papers that start from states of definite j are embedded exactly: the wanted p states are cut out
of the p shell by a projector and the others sit at one flat energy far above, touching nothing.
"""

from __future__ import annotations

import numpy as np

from topovet.demo.lattice import (
    IN_PLANE,
    SIGMA,
    VACUUM_ANGSTROM,
    LatticeModel,
    Terms,
    bonds,
    build_basis,
    honeycomb_cell,
    two_steps,
)
from topovet.model.crystal import Crystal


def kane_mele(
    *, t: float = 1.0, lambda_so: float = 0.06, lambda_v: float = 0.0, lambda_r: float = 0.0
) -> LatticeModel:
    """Kane and Mele's graphene: pz orbitals on the honeycomb lattice, half filled.

    H = t sum_<ij> c†_i c_j + i lambda_so sum_<<ij>> nu_ij c†_i s_z c_j
        + i lambda_r sum_<ij> c†_i (s x d_ij)_z c_j + lambda_v sum_i xi_i c†_i c_i,

    nu_ij = (2/sqrt 3) (d1 x d2)_z = +-1 with unit vectors d1, d2 along the two bonds from j to i,
    and d_ij the unit bond vector. Without Rashba term the gap at K is
    |6 sqrt(3) lambda_so - 2 lambda_v|: nu = 1 for lambda_v < 3 sqrt(3) lambda_so, else 0.
    lambda_v and lambda_r both break inversion.

    References
    ----------
    Kane, Mele, PRL 95, 226801 (2005), doi:10.1103/PhysRevLett.95.226801, and
    PRL 95, 146802 (2005), doi:10.1103/PhysRevLett.95.146802 (Eq. 1 and Fig. 1).
    """
    cell = honeycomb_cell(2.46)
    positions = np.array([[1 / 3, 2 / 3, 0.5], [2 / 3, 1 / 3, 0.5]])
    terms = Terms(4)
    site = (slice(0, 2), slice(2, 4))
    terms.add_onsite(site[0], lambda_v * np.eye(2))
    terms.add_onsite(site[1], -lambda_v * np.eye(2))
    for r_cell, vector in bonds(cell, positions, 0, 1):
        d = -vector / np.linalg.norm(vector)  # from j to i
        rashba = 1j * lambda_r * (SIGMA[0] * d[1] - SIGMA[1] * d[0])
        terms.add(r_cell, site[0], site[1], t * np.eye(2) + rashba)
    for i in (0, 1):
        for r_cell, d1, d2 in two_steps(cell, positions, i):
            nu = np.sign(np.cross(d1, d2)[2])
            # both R and -R are in the list, and add() supplies the partner: half of each
            terms.add(r_cell, site[i], site[i], 0.5j * lambda_so * nu * SIGMA[2])
    r_cells, h_r = terms.arrays()
    basis = build_basis([("C1", positions[0], "pz"), ("C2", positions[1], "pz")])
    crystal = Crystal(cell, ("C", "C"), positions, IN_PLANE)
    return LatticeModel("kane_mele", crystal, basis, r_cells, h_r, 2, True, (0.0, 0.0, 0.5))


def bhz(
    *, m: float, a: float = 1.0, b: float = 1.0, c: float = 0.0, d: float = 0.0
) -> LatticeModel:
    """Bernevig, Hughes and Zhang's quantum well on the square lattice; s, px, py, filling 2.

    In the basis |s up>, |p+ up> the upper block is h(k) = eps(k) + d(k).sigma with

        d1 + i d2 = a (sin kx + i sin ky),   d3 = -2b [2 - m/(2b) - cos kx - cos ky],
        eps = c - 2d [2 - cos kx - cos ky],

    and the lower block, |s down>, |p- down>, is h(-k)*. This is the paper's lattice form with
    one site per cell and lattice constant 1. d3 is m at Gamma, m - 4b at both X, m - 8b at M:
    parities change at m/b = 0, 4 and 8, and nu = 1 for 0 < m/b < 8 but for the closing at 4.

    The four-band model is embedded in s, px, py: p+ up and p- down are the states of
    (1 + L_z sigma_z)/2, and s-p hopping a/sqrt(2) has the signs of real s and p orbitals.

    References
    ----------
    Bernevig, Hughes, Zhang, Science 314, 1757 (2006), doi:10.1126/science.1133734.
    """
    terms = Terms(6)
    s, p = slice(0, 2), slice(2, 6)
    l_z = np.array([[0, -1j], [1j, 0]])  # on (px, py)
    near = (np.eye(4) + np.kron(l_z, SIGMA[2])) / 2
    far_ev = c + 8 * (abs(d) + abs(b)) + abs(m) + 4 * abs(a) + 5.0
    level = c - 4 * d
    terms.add_onsite(s, (level + m - 4 * b) * np.eye(2))
    terms.add_onsite(p, (level - m + 4 * b) * near + far_ev * (np.eye(4) - near))
    for axis, r_cell in enumerate([(1, 0, 0), (0, 1, 0)]):
        terms.add(r_cell, s, s, (d + b) * np.eye(2))
        terms.add(r_cell, p, p, (d - b) * near)
        s_to_p = np.kron(np.eye(2)[axis], np.eye(2)) @ near * a / np.sqrt(2)
        terms.add(r_cell, s, p, s_to_p)
        terms.add(r_cell, p, s, -s_to_p.conj().T)
    r_cells, h_r = terms.arrays()
    position = (0.0, 0.0, 0.0)
    basis = build_basis([("Hg1", position, name) for name in ("s", "px", "py")])
    cell = np.diag([6.46, 6.46, VACUUM_ANGSTROM])
    crystal = Crystal(cell, ("Hg",), np.array([position]), IN_PLANE)
    return LatticeModel("bhz", crystal, basis, r_cells, h_r, 2, True, position)


def haldane(
    *, t1: float = 1.0, t2: float = 0.1, phi: float = np.pi / 2, m: float = 0.0
) -> LatticeModel:
    """Haldane's spinless honeycomb model, one band of two filled.

    H = t1 sum_<ij> c†_i c_j + t2 sum_<<ij>> exp(i nu_ij phi) c†_i c_j + m sum_i xi_i c†_i c_i with
    nu_ij = +-1 by the sense of turning. |C| = 1 for |m| < 3 sqrt(3) |t2 sin phi|, else 0.

    References
    ----------
    Haldane, PRL 61, 2015 (1988), doi:10.1103/PhysRevLett.61.2015 (Eq. 1, Fig. 2).
    """
    cell = honeycomb_cell(2.46)
    positions = np.array([[1 / 3, 2 / 3, 0.5], [2 / 3, 1 / 3, 0.5]])
    terms = Terms(2)
    site = (slice(0, 1), slice(1, 2))
    terms.add_onsite(site[0], m * np.eye(1))
    terms.add_onsite(site[1], -m * np.eye(1))
    for r_cell, _ in bonds(cell, positions, 0, 1):
        terms.add(r_cell, site[0], site[1], t1 * np.eye(1))
    for i in (0, 1):
        for r_cell, d1, d2 in two_steps(cell, positions, i):
            nu = np.sign(np.cross(d1, d2)[2])
            # both R and -R are in the list, and add() supplies the partner: half of each
            terms.add(r_cell, site[i], site[i], 0.5 * t2 * np.exp(1j * nu * phi) * np.eye(1))
    r_cells, h_r = terms.arrays()
    basis = build_basis([("C1", positions[0], "pz"), ("C2", positions[1], "pz")], spinful=False)
    crystal = Crystal(cell, ("C", "C"), positions, IN_PLANE)
    return LatticeModel("haldane", crystal, basis, r_cells, h_r, 1, False, (0.0, 0.0, 0.5))


def qi_wu_zhang(*, m: float) -> LatticeModel:
    """Qi, Wu and Zhang's square-lattice model, one band of two filled; nominal basis s, pz.

    H = sin kx sigma_x + sin ky sigma_y + (m + cos kx + cos ky) sigma_z: |C| = 1 for 0 < |m| < 2,
    where the sign of m decides the sign of C, and 0 for |m| > 2.

    References
    ----------
    Qi, Wu, Zhang, PRB 74, 085308 (2006), doi:10.1103/PhysRevB.74.085308 (Eqs. 2 and 10, with
    their cos kx + cos ky - 2 + e_s written m).
    """
    terms, both = Terms(2), slice(0, 2)
    terms.add_onsite(both, m * SIGMA[2])
    terms.add((1, 0, 0), both, both, SIGMA[2] / 2 + SIGMA[0] / 2j)
    terms.add((0, 1, 0), both, both, SIGMA[2] / 2 + SIGMA[1] / 2j)
    r_cells, h_r = terms.arrays()
    position = (0.0, 0.0, 0.0)
    basis = build_basis([("X1", position, "s"), ("X1", position, "pz")], spinful=False)
    crystal = Crystal(np.diag([4.0, 4.0, VACUUM_ANGSTROM]), ("H",), np.array([position]), IN_PLANE)
    return LatticeModel("qi_wu_zhang", crystal, basis, r_cells, h_r, 1, False, position)
