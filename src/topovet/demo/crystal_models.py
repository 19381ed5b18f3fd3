"""Three-dimensional models on lattices of the literature, each with known indices."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.demo.lattice import (
    HARMONICS,
    SIGMA,
    LatticeModel,
    Terms,
    bonds,
    build_basis,
    l_dot_sigma,
    two_steps,
    with_hops,
)
from topovet.demo.planar_models import bhz, qi_wu_zhang
from topovet.model.crystal import Crystal

P_ORDER = (2, 0, 1)
"""Axes of the p orbitals in Wannier90's order z, x, y."""


def fu_kane_mele(
    *,
    t: float = 1.0,
    lambda_so: float = 0.125,
    dt: Sequence[float] | FloatArray = (0.0, 0.0, 0.0, 0.0),
) -> LatticeModel:
    """Fu, Kane and Mele's diamond lattice of s orbitals with four bond modulations, half filled.

    H = sum_p (t + dt_p) c†_A c_B over the four bonds
        + i (8 lambda_so / a^2) sum_<<ij>> c†_i s.(d1 x d2) c_j.

    Primitive vectors a1 = a/2 (0,1,1), a2 = a/2 (1,0,1), a3 = a/2 (1,1,0), A at 0, B at
    a/4 (1,1,1): bond 0 stays in the cell and points along (111), bond i = 1, 2, 3 leads to the
    cell -a_i and points along (1,-1,-1), (-1,1,-1), (-1,-1,1). The spin-orbit term vanishes at
    the TRIM, where the gap is 2|f| with f = t0 + t1 s1 + t2 s2 + t3 s3, s_i = exp(2 pi i k_i).
    About the middle of bond 0 (inversion A <-> B) delta = -sgn f for positive orbitals. With
    only t0 changed f is t0 + 3t at Gamma, t0 + t at three L, t0 - t at three X, t0 - 3t at the
    L with all s_i = -1. Counting the negative ones in each plane gives 0;(000) for t0 > 3t,
    1;(111) for t < t0 < 3t, 0;(111) for |t0| < t: the paper's strong phase for dt > 0 and its
    weak phase (stacked layers) for dt < 0, here with G = b1 + b2 + b3 = (2 pi/a)(111) of the
    conventional cell. A change of bond i instead multiplies delta by s_i, which no plane notices,
    and moves the odd point to k = b_i/2: 1;(100) for bond 1 and so on, G = b1 = (2 pi/a)(-1,1,1),
    again along the bond. All dt equal: gapless, Dirac points at the three X.

    References
    ----------
    Fu, Kane, Mele, PRL 98, 106803 (2007), doi:10.1103/PhysRevLett.98.106803.
    """
    length = 5.43
    cell = length / 2 * np.array([[0, 1, 1], [1, 0, 1], [1, 1, 0]], dtype=float)
    positions = np.array([[0.0, 0.0, 0.0], [0.25, 0.25, 0.25]])
    terms = Terms(4)
    site = (slice(0, 2), slice(2, 4))
    for p, r_cell in enumerate([(0, 0, 0), (-1, 0, 0), (0, -1, 0), (0, 0, -1)]):
        terms.add(r_cell, site[0], site[1], (t + dt[p]) * np.eye(2))
    for i in (0, 1):
        for r_cell, d1, d2 in two_steps(cell, positions, i):
            spin = np.tensordot(np.cross(d1, d2), SIGMA, axes=1)
            terms.add(r_cell, site[i], site[i], 0.5j * 8 * lambda_so / length**2 * spin)
    r_cells, h_r = terms.arrays()
    basis = build_basis([("Si1", positions[0], "s"), ("Si2", positions[1], "s")])
    crystal = Crystal(cell, ("Si", "Si"), positions)
    centre = (0.125, 0.125, 0.125)
    return LatticeModel("fu_kane_mele", crystal, basis, r_cells, h_r, 2, True, centre)


def atomic_insulator(
    *,
    filled: str = "p",
    gap_ev: float = 4.0,
    hop: float = 0.2,
    soc: float = 0.3,
    spinful: bool = True,
) -> LatticeModel:
    """An ionic crystal of the CsCl type: s on the cation, p on the anion, one of them filled.

    Continuously connected to isolated ions, so every index is 0 while hop is small beside
    gap_ev. About the cation at the origin a state of parity q on the anion at (1/2, 1/2, 1/2)
    has q exp(2 pi i k.(1,1,1)): q at TRIM with an even number of halves, -q at the others.

    References
    ----------
    An atomic limit has trivial indices: Fu, Kane, PRB 76, 045302 (2007),
    doi:10.1103/PhysRevB.76.045302. s-p hopping by direction cosines: Slater, Koster,
    Phys. Rev. 94, 1498 (1954), doi:10.1103/PhysRev.94.1498.
    """
    spin = np.eye(2 if spinful else 1)
    n_spin = len(spin)
    terms = Terms(4 * n_spin)
    s, p = slice(0, n_spin), slice(n_spin, 4 * n_spin)
    sign = 1.0 if filled == "p" else -1.0
    axes = (2, 0, 1)
    terms.add_onsite(s, sign * gap_ev / 2 * spin)
    terms.add_onsite(p, -sign * gap_ev / 2 * np.eye(3 * n_spin))
    if spinful:
        l_sigma = l_dot_sigma(axes)
        terms.add_onsite(p, soc / 2 * l_sigma)
    cell = 4.12 * np.eye(3)
    positions = np.array([[0.0, 0.0, 0.0], [0.5, 0.5, 0.5]])
    for r_cell, vector in bonds(cell, positions, 0, 1):
        cosines = vector[list(axes)] / np.linalg.norm(vector)
        terms.add(r_cell, s, p, hop * np.kron(cosines, spin))
    r_cells, h_r = terms.arrays()
    orbitals = [("Cs1", positions[0], "s"), *(("Cl1", positions[1], q) for q in HARMONICS[1:])]
    basis = build_basis(orbitals, spinful=spinful)
    crystal = Crystal(cell, ("Cs", "Cl"), positions)
    filling = n_spin * (3 if filled == "p" else 1)
    name = f"atomic_{filled}"
    return LatticeModel(name, crystal, basis, r_cells, h_r, filling, spinful, (0.0, 0.0, 0.0))


def snte(
    *, m: float = 1.65, t_cross: float = 0.9, t_like: float = 0.5, soc: float = 0.7
) -> LatticeModel:
    """Rock salt with p orbitals on both sites: Hsieh et al.'s model of SnTe, half filled.

    On-site energy m on one sublattice and -m on the other, sigma hopping d(d.) of strength t_cross
    between neighbours and +-t_like on either sublattice, spin-orbit coupling soc L.sigma. At large
    m the p shell of one ion is filled: trivial. At the default values bands at all four L are
    inverted, and the mirror planes that hold two of them, (110) and its like, have mirror
    Chern number of magnitude 2.

    References
    ----------
    Hsieh et al., Nat. Commun. 3, 982 (2012), doi:10.1038/ncomms1969 (mirror Chern number -2;
    tight-binding model in its Methods; numerical values from memory).
    """
    length = 6.3
    cell = length / 2 * np.array([[0, 1, 1], [1, 0, 1], [1, 1, 0]], dtype=float)
    positions = np.array([[0.0, 0.0, 0.0], [0.5, 0.5, 0.5]])
    site = (slice(0, 6), slice(6, 12))
    terms = Terms(12)
    for i, sign in enumerate((1, -1)):
        terms.add_onsite(site[i], sign * m * np.eye(6) + soc * l_dot_sigma(P_ORDER))
        for r_cell, vector in bonds(cell, positions, i, i):
            # both R and -R are in the list, and add() supplies the partner: half of each
            hop = sign * t_like / 2 * _sigma_bond(vector)
            terms.add(r_cell, site[i], site[i], hop)
    for r_cell, vector in bonds(cell, positions, 0, 1):
        terms.add(r_cell, site[0], site[1], t_cross * _sigma_bond(vector))
    r_cells, h_r = terms.arrays()
    names = ("pz", "px", "py")
    basis = build_basis(
        [("Sn1", positions[0], name) for name in names]
        + [("Te1", positions[1], name) for name in names]
    )
    crystal = Crystal(cell, ("Sn", "Te"), positions)
    return LatticeModel("snte", crystal, basis, r_cells, h_r, 6, True, (0.0, 0.0, 0.0))


def _sigma_bond(vector: FloatArray) -> FloatArray:
    """d d^T on (pz, px, py), times one in spin space."""
    d = vector[[2, 0, 1]] / np.linalg.norm(vector)
    return np.asarray(np.kron(np.outer(d, d), np.eye(2)), dtype=np.float64)


def layered_bhz(*, m: float = 1.5, t_z: float = 0.3) -> LatticeModel:
    """BHZ layers stacked along z, mass m + 2 t_z cos kz: the weak phase 0;(001) for 0 < mass < 4.

    Hopping t_z for s and -t_z for p keeps the form of the layer at each kz, so every plane of
    constant kz has the layer's own index.

    References
    ----------
    A stack of quantum spin Hall layers is a weak topological insulator: Fu, Kane, Mele, PRL 98,
    106803 (2007), doi:10.1103/PhysRevLett.98.106803. Phases of the layer: see `bhz`.
    """
    layer = bhz(m=m)
    # near p states are those of the layer's own in-plane p hopping, (d - b) near with b = 1, d = 0
    p = slice(2, 6)
    hop_p = layer.h_r[[tuple(r) == (1, 0, 0) for r in layer.r_cells.tolist()]][0][p, p]
    hop = np.zeros((6, 6), dtype=complex)
    hop[:2, :2], hop[p, p] = t_z * np.eye(2), t_z * hop_p
    crystal = Crystal(np.diag([6.46, 6.46, 8.0]), ("Hg",), layer.crystal.positions_frac)
    return with_hops(replace(layer, crystal=crystal, name="layered_bhz"), {(0, 0, 1): hop})


def chern_stack(*, m: float = 1.0, t_z: float = 0.2) -> LatticeModel:
    """Qi-Wu-Zhang layers stacked along z, m + 2 t_z cos kz: Chern vector (0, 0, C) of the layer."""
    layer = qi_wu_zhang(m=m)
    crystal = Crystal(np.diag([4.0, 4.0, 5.0]), ("H",), layer.crystal.positions_frac)
    return with_hops(
        replace(layer, crystal=crystal, name="chern_stack"), {(0, 0, 1): t_z * SIGMA[2]}
    )
