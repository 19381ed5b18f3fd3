"""Lattice models of the literature as test cases, each with known parities and indices.

Every model is written in s and p orbitals with spin (interlaced: up, down), so that its basis
is declared as completely as that of a first-principles case. Papers that start from states of
definite j (BHZ, Wilson-Dirac) are embedded exactly: the wanted p states are cut out of the full
p shell by a projector and the others sit at one flat energy far above, touching nothing.

Energies in eV, lengths in angstrom; H_mn(R) = <m 0|H|n R>, H(k) = sum_R exp(2 pi i k.R) H(R).
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel, build_model

HARMONICS = ("s", "pz", "px", "py")
"""Names of the first columns of `OrbitalBasis.harmonics`."""

SIGMA: ComplexArray = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])
"""Pauli matrices x, y, z."""

VACUUM_ANGSTROM = 20.0
"""Third lattice vector of the two-dimensional models."""

Matrix = FloatArray | ComplexArray
Vector = tuple[float, float, float]
Cell = tuple[int, int, int]


@dataclass(frozen=True, slots=True, eq=False)
class LatticeModel:
    """A tight-binding model with all that a case folder would say about it.

    Attributes
    ----------
    name
        Seed name of its files.
    crystal, basis
        As `topovet.model` defines them.
    r_cells
        (n_r, 3) integer lattice vectors, each with its negative.
    h_r
        (n_r, n_orb, n_orb) eV, all weights applied.
    filling
        Occupied bands, spin counted.
    spinful
        Whether the orbitals come in spin pairs.
    centre
        An inversion centre of the crystal, fractional; where the Hamiltonian has no inversion
        it is still the centre of the undistorted model.
    """

    name: str
    crystal: Crystal
    basis: OrbitalBasis
    r_cells: IntArray
    h_r: ComplexArray
    filling: int
    spinful: bool
    centre: Vector

    @property
    def n_orb(self) -> int:
        return self.basis.n_orb

    def tight_binding(self) -> TightBindingModel:
        """The model in the form the package computes with."""
        return build_model(self.r_cells, self.h_r, spinful=self.spinful)

    def hamiltonian_at(self, k_frac: Sequence[float]) -> ComplexArray:
        """H(k), (n_orb, n_orb) eV, by a plain loop over R: independent of the package."""
        h = np.zeros((self.n_orb, self.n_orb), dtype=complex)
        for r_cell, block in zip(self.r_cells, self.h_r, strict=True):
            h += np.exp(2j * np.pi * float(np.dot(k_frac, r_cell))) * block
        return h


class Terms:
    """Collects on-site and hopping blocks, each hopping with its Hermitian partner."""

    def __init__(self, n_orb: int) -> None:
        self._blocks: dict[Cell, ComplexArray] = defaultdict(
            lambda: np.zeros((n_orb, n_orb), dtype=complex)
        )

    def add(self, r_cell: Sequence[int], rows: slice, columns: slice, block: Matrix) -> None:
        """H(R)[rows, columns] += block and H(-R)[columns, rows] += block†."""
        r = (int(r_cell[0]), int(r_cell[1]), int(r_cell[2]))
        self._blocks[r][rows, columns] += block
        self._blocks[(-r[0], -r[1], -r[2])][columns, rows] += block.conj().T

    def add_onsite(self, where: slice, block: Matrix) -> None:
        self._blocks[(0, 0, 0)][where, where] += block

    def arrays(self) -> tuple[IntArray, ComplexArray]:
        """Lattice vectors in order and their blocks."""
        cells = sorted(self._blocks)
        return np.array(cells, dtype=np.int64), np.array([self._blocks[r] for r in cells])


def build_basis(
    orbitals: Sequence[tuple[str, Sequence[float] | FloatArray, str]], *, spinful: bool = True
) -> OrbitalBasis:
    """Basis from (site label, position, harmonic name), spin up and down for each if spinful."""
    spins = [("up", (1, 0)), ("down", (0, 1))] if spinful else [("", (1, 0))]
    positions, harmonics, spinors, labels = [], [], [], []
    for site, position, harmonic in orbitals:
        row = np.zeros(16)
        row[HARMONICS.index(harmonic)] = 1.0
        for spin_name, spinor in spins:
            positions.append(position)
            harmonics.append(row)
            spinors.append(spinor)
            labels.append(f"{site} {harmonic} {spin_name}".rstrip())
    return OrbitalBasis(
        np.array(positions, dtype=float),
        np.array(harmonics),
        np.array(spinors, dtype=complex),
        tuple(labels),
        np.ones(len(labels), dtype=np.int64),
    )


def bonds(cell: FloatArray, positions: FloatArray, i: int, j: int) -> list[tuple[Cell, FloatArray]]:
    """Nearest-neighbour bonds from site i to copies of site j: (R, vector from i to j in A)."""
    found = []
    for r in np.ndindex(3, 3, 3):
        r_cell = (r[0] - 1, r[1] - 1, r[2] - 1)
        vector = (positions[j] + r_cell - positions[i]) @ cell
        found.append((r_cell, vector))
    lengths = [float(np.linalg.norm(v)) for _, v in found]
    nearest = min(length for length in lengths if length > 1e-6)
    return [
        bond for bond, length in zip(found, lengths, strict=True) if abs(length - nearest) < 1e-6
    ]


def honeycomb_cell(a: float) -> FloatArray:
    return np.array([[a, 0, 0], [-a / 2, a * np.sqrt(3) / 2, 0], [0, 0, VACUUM_ANGSTROM]])


def two_steps(
    cell: FloatArray, positions: FloatArray, i: int
) -> list[tuple[Cell, FloatArray, FloatArray]]:
    """Next-nearest neighbours of site i of a two-site lattice on its own sublattice.

    Returns (R, d1, d2) for every <i 0|H|i R> with R != 0: d1 and d2 are the two bonds that lead
    from the site in cell R over the common neighbour to the site in the home cell.
    """
    j = 1 - i
    steps = []
    for r_mid, to_mid in bonds(cell, positions, i, j):
        for r_last, to_last in bonds(cell, positions, j, i):
            r_cell = tuple(int(x) for x in np.add(r_mid, r_last))
            if any(r_cell):
                steps.append(((r_cell[0], r_cell[1], r_cell[2]), -to_last, -to_mid))
    return steps


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
    crystal = Crystal(cell, ("C", "C"), positions, (True, True, False))
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
    crystal = Crystal(cell, ("Hg",), np.array([position]), (True, True, False))
    return LatticeModel("bhz", crystal, basis, r_cells, h_r, 2, True, position)


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
    l_sigma = _l_dot_sigma(axes)
    two_j_z = 2 * np.kron(_angular_momentum(2, axes), np.eye(2)) + np.kron(np.eye(3), SIGMA[2])
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


def _angular_momentum(component: int, axes: Sequence[int]) -> ComplexArray:
    """L_component on real p orbitals along the given axes: <i|L_k|j> = -i epsilon_kij."""
    epsilon = np.zeros((3, 3, 3))
    for i in range(3):
        epsilon[i, (i + 1) % 3, (i + 2) % 3] = 1.0
        epsilon[i, (i + 2) % 3, (i + 1) % 3] = -1.0
    return np.asarray(-1j * epsilon[component][np.ix_(list(axes), list(axes))])


def _l_dot_sigma(axes: Sequence[int]) -> ComplexArray:
    """L.sigma on p orbitals (x) spin: 1 for j = 3/2, -2 for j = 1/2."""
    parts = [np.kron(_angular_momentum(i, axes), SIGMA[i]) for i in range(3)]
    return np.asarray(np.sum(parts, axis=0))


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
        l_sigma = _l_dot_sigma(axes)
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
