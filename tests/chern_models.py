"""Lattice models without Fu-Kane indices: Chern, inversion-broken, doubled and mirror phases.

Conventions as in `lattice_models`. Where a paper's orbitals are of no concern the declared basis is
only nominal, which the docstring says.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from lattice_models import (
    SIGMA,
    VACUUM_ANGSTROM,
    LatticeModel,
    Terms,
    bhz,
    bonds,
    build_basis,
    honeycomb_cell,
    two_steps,
    wilson_dirac,
)
from topovet.arrays import ComplexArray, FloatArray
from topovet.model.crystal import Crystal

IN_PLANE = (True, True, False)


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


def hofstadter(*, p: int, q: int, filling: int) -> LatticeModel:
    """Electrons on the square lattice with p/q flux quanta per plaquette, in a cell of q sites.

    Landau gauge: hopping along y at column j has the phase 2 pi j p/q. The total Chern number of
    the lowest r bands is, up to one sign for all, the t of the Diophantine equation r = q s + p t
    with |t| <= q/2.

    References
    ----------
    Hofstadter, PRB 14, 2239 (1976), doi:10.1103/PhysRevB.14.2239; Thouless, Kohmoto, Nightingale,
    den Nijs, PRL 49, 405 (1982), doi:10.1103/PhysRevLett.49.405 (Eqs. 8 to 10).
    """
    terms, column = Terms(q), [slice(j, j + 1) for j in range(q)]
    for j in range(q):
        cell = (1, 0, 0) if j == q - 1 else (0, 0, 0)
        terms.add(cell, column[j], column[(j + 1) % q], np.eye(1))
        terms.add((0, 1, 0), column[j], column[j], np.exp(2j * np.pi * j * p / q) * np.eye(1))
    r_cells, h_r = terms.arrays()
    positions = np.array([[j / q, 0.0, 0.0] for j in range(q)])
    basis = build_basis([(f"H{j + 1}", positions[j], "s") for j in range(q)], spinful=False)
    crystal = Crystal(np.diag([4.0 * q, 4.0, VACUUM_ANGSTROM]), ("H",) * q, positions, IN_PLANE)
    return LatticeModel("hofstadter", crystal, basis, r_cells, h_r, filling, False, (0.0, 0.0, 0.0))


def chern_stack(*, m: float = 1.0, t_z: float = 0.2) -> LatticeModel:
    """Qi-Wu-Zhang layers stacked along z, m + 2 t_z cos kz: Chern vector (0, 0, C) of the layer."""
    layer = qi_wu_zhang(m=m)
    crystal = Crystal(np.diag([4.0, 4.0, 5.0]), ("H",), layer.crystal.positions_frac)
    return _with_hops(
        replace(layer, crystal=crystal, name="chern_stack"), {(0, 0, 1): t_z * SIGMA[2]}
    )


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
    return _with_hops(replace(layer, crystal=crystal, name="layered_bhz"), {(0, 0, 1): hop})


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
    return _with_onsite(replace(model, name="chiral_wilson_dirac"), onsite)


def staggered(model: LatticeModel, v: float) -> LatticeModel:
    """A potential +v, -v on the two sites of a four-band model: breaks inversion A <-> B."""
    return _with_onsite(replace(model, name=f"staggered_{model.name}"), np.diag([v, v, -v, -v]))


def zeeman(model: LatticeModel, field: float) -> LatticeModel:
    """field sigma_z on every orbital: time reversal is broken."""
    return _with_onsite(model, field * np.kron(np.eye(model.n_orb // 2), SIGMA[2]))


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
    l_dot_sigma = _l_dot_sigma()
    for i, sign in enumerate((1, -1)):
        terms.add_onsite(site[i], sign * m * np.eye(6) + soc * l_dot_sigma)
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


def snte_mirror() -> ComplexArray:
    """Reflection x <-> y of `snte`, (12, 12): every site stays in its cell, so k does not enter.

    px and py change places; spin turns by pi about the normal (1, -1, 0)/sqrt(2), -i n.sigma.
    """
    swap = np.array([[1, 0, 0], [0, 0, 1], [0, 1, 0]])
    spin = -1j * (SIGMA[0] - SIGMA[1]) / np.sqrt(2)
    return np.asarray(np.kron(np.eye(2), np.kron(swap, spin)))


def _sigma_bond(vector: FloatArray) -> FloatArray:
    """d d^T on (pz, px, py), times one in spin space."""
    d = vector[[2, 0, 1]] / np.linalg.norm(vector)
    return np.kron(np.outer(d, d), np.eye(2))


def _l_dot_sigma() -> ComplexArray:
    """L.sigma on (pz, px, py) with spin, <i|L_k|j> = -i epsilon_kij."""
    epsilon = np.zeros((3, 3, 3))
    for a, b, c in ((0, 1, 2), (1, 2, 0), (2, 0, 1)):
        epsilon[a, b, c], epsilon[a, c, b] = 1.0, -1.0
    order = [2, 0, 1]
    return np.asarray(
        sum(np.kron(-1j * epsilon[k][np.ix_(order, order)], SIGMA[k]) for k in range(3))
    )


def _with_onsite(model: LatticeModel, onsite: ComplexArray | FloatArray) -> LatticeModel:
    h_r = model.h_r.copy()
    h_r[~model.r_cells.any(axis=1)] += onsite
    return replace(model, h_r=h_r)


def _with_hops(model: LatticeModel, hops: dict[tuple[int, int, int], ComplexArray]) -> LatticeModel:
    """The model and H(R) for more R, each with its partner."""
    r_cells, h_r = list(map(tuple, model.r_cells.tolist())), list(model.h_r)
    for r_cell, block in hops.items():
        r_cells += [r_cell, (-r_cell[0], -r_cell[1], -r_cell[2])]
        h_r += [block, block.conj().T]
    return replace(model, r_cells=np.array(r_cells, dtype=np.int64), h_r=np.array(h_r))


def random_model(seed: int, *, inversion: bool, in_plane: bool = False) -> LatticeModel:
    """Random hopping with time reversal between s and p orbitals at the origin, half filled.

    H(R) = a(R) 1 + i b(R).sigma with real a, b, so that i sigma_y K holds; with inversion
    H(-R) = P H(R) P is put in besides, P = +1 for s and -1 for p. Levels are pushed apart by an
    amount that depends on the seed, so that gaps of all sizes and many different indices occur.
    """
    rng = np.random.default_rng(seed)
    names = ("s", "pz", "px", "py")
    n, parity = len(names), np.array([1.0, -1.0, -1.0, -1.0])
    reach = [range(-1, 2), range(-1, 2), range(1) if in_plane else range(-1, 2)]
    spread = np.diag(rng.permutation([-1, -1, 1, 1]) * rng.choice([0.0, 1.5, 3.0]))
    blocks = {}
    for r in ((x, y, z) for x in reach[0] for y in reach[1] for z in reach[2]):
        a = rng.normal(size=(4, n, n)) * np.exp(-0.7 * np.linalg.norm(r))
        a[0] += spread if not any(r) else 0.0
        blocks[r] = np.kron(a[0], np.eye(2)) + 1j * sum(
            np.kron(a[i + 1], SIGMA[i]) for i in range(3)
        )
    p = np.kron(np.diag(parity), np.eye(2))
    opposite = {r: blocks[-r[0], -r[1], -r[2]] for r in blocks}
    hermitian = {r: (blocks[r] + opposite[r].conj().T) / 2 for r in blocks}
    if inversion:
        hermitian = {
            r: (h + p @ hermitian[-r[0], -r[1], -r[2]] @ p) / 2 for r, h in hermitian.items()
        }
    cells = sorted(hermitian)
    origin = (0.0, 0.0, 0.0)
    return LatticeModel(
        name=f"random_{seed}",
        crystal=Crystal(4 * np.eye(3), ("A",), np.zeros((1, 3)), (True, True, not in_plane)),
        basis=build_basis([("A1", origin, name) for name in names]),
        r_cells=np.array(cells, dtype=np.int64),
        h_r=np.array([hermitian[r] for r in cells]),
        filling=n,
        spinful=True,
        centre=origin,
    )
