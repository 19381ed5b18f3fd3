"""Semimetals of the literature with nodes known in closed form."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from lattice_models import SIGMA, LatticeModel, Terms, bhz, build_basis
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel, build_model

Cell = tuple[int, int, int]
HOME: Cell = (0, 0, 0)
ORIGIN = (0.0, 0.0, 0.0)


def two_bands(terms: dict[Cell, np.ndarray]) -> TightBindingModel:
    """H(R) of two spinless bands from blocks for R and, but for R = 0, their partners."""
    cells, blocks = [], []
    for r_cell, block in terms.items():
        cells.append(r_cell)
        blocks.append(np.asarray(block, dtype=complex))
        if any(r_cell):
            cells.append((-r_cell[0], -r_cell[1], -r_cell[2]))
            blocks.append(np.asarray(block, dtype=complex).conj().T)
    return build_model(np.array(cells), np.array(blocks), spinful=False)


def weyl_two_band(kz: float, *, tilt: float = 0.0) -> TightBindingModel:
    """Two Weyl points at (0, 0, ±kz), kz fractional.

    H = sin a_1 sigma_x + sin a_2 sigma_y + (cos a_3 - cos 2 pi kz + 2 - cos a_1 - cos a_2) sigma_z
        + tilt sin a_3,   a = 2 pi k.

    Around (0, 0, s kz): d = (q_1, q_2, -s sin(2 pi kz) q_3), chirality sign det = -s. Type II for
    |tilt cos(2 pi kz)| > |sin(2 pi kz)|. The model of Yang, Lu, Ran, PRB 84, 075129 (2011) (Eq. 1)
    in our letters, with the tilt of Soluyanov et al., Nature 527, 495 (2015).
    """
    x, y, z = SIGMA
    return two_bands(
        {
            HOME: (2 - np.cos(2 * np.pi * kz)) * z,
            (1, 0, 0): x / 2j - z / 2,
            (0, 1, 0): y / 2j - z / 2,
            (0, 0, 1): z / 2 + tilt * np.eye(2) / 2j,
        }
    )


def double_weyl(kz: float) -> TightBindingModel:
    """Two Weyl points of charge 2 at (0, 0, ±kz) on a fourfold axis.

    H = (cos a_1 - cos a_2) sigma_x + sin a_1 sin a_2 sigma_y
        + (cos a_3 - cos 2 pi kz + 2 - cos a_1 - cos a_2) sigma_z.

    Around (0, 0, s kz): d_x + i d_y = -(q_1^2 - q_2^2)/2 + i q_1 q_2, which turns by -2 on a
    counter-clockwise circle, and d_z = -s sin(2 pi kz) q_3: charge +2 s. Fang, Gilbert, Dai,
    Bernevig, PRL 108, 266802 (2012), doi:10.1103/PhysRevLett.108.266802 (charge 2 with C4).
    """
    x, y, z = SIGMA
    return two_bands(
        {
            HOME: (2 - np.cos(2 * np.pi * kz)) * z,
            (1, 0, 0): x / 2 - z / 2,
            (0, 1, 0): -x / 2 - z / 2,
            (0, 0, 1): z / 2,
            # sin a sin b = (cos(a - b) - cos(a + b)) / 2
            (1, -1, 0): y / 4,
            (1, 1, 0): -y / 4,
        }
    )


def on_axis_dirac(*, node: float = 0.2, bz: float = 0.5) -> LatticeModel:
    """Dirac points at (0, 0, ±node) on a fourfold axis; s and p states, filling 2.

    Planes of `bhz` with m = 2 bz (cos a_3 - cos 2 pi node), zero at the nodes: on the axis
    the s doublet (j_z = ±1/2) and the p doublet (j_z = ±3/2) cross at a_3 = ±2 pi node, with
    different C4 eigenvalues. Velocities a (in-plane hopping times its lattice constant) and
    2 bz sin(2 pi node) c. This is the four-band model of Wang, Weng, Wu, Dai, Fang, PRB 88, 125427
    (2013), doi:10.1103/PhysRevB.88.125427 (Cd3As2), the tetragonal twin of Na3Bi's, Wang et al.,
    PRB 85, 195320 (2012), doi:10.1103/PhysRevB.85.195320.
    """
    plane = bhz(m=0.0, a=1.0, b=1.0)
    s, p = slice(0, 2), slice(2, 6)
    l_z = np.array([[0, -1j], [1j, 0]])
    near = (np.eye(4) + np.kron(l_z, SIGMA[2])) / 2
    h_r = plane.h_r.copy()
    level = -2 * bz * np.cos(2 * np.pi * node)
    home = ~plane.r_cells.any(axis=1)
    h_r[np.ix_(home, range(2), range(2))] += level * np.eye(2)
    h_r[np.ix_(home, range(2, 6), range(2, 6))] -= level * near
    hop = np.zeros((6, 6), dtype=complex)
    hop[s, s], hop[p, p] = bz * np.eye(2), -bz * near
    r_cells = np.concatenate([plane.r_cells, [[0, 0, 1], [0, 0, -1]]])
    crystal = Crystal(np.diag([4.0, 4.0, 5.0]), ("Cd",), np.zeros((1, 3)))
    return replace(
        plane,
        name="axis_dirac",
        crystal=crystal,
        r_cells=r_cells,
        h_r=np.concatenate([h_r, hop[None], hop.conj().T[None]]),
    )


def nodal_ring(*, radius_cos: float = 0.5, hybridise: float = 0.0) -> LatticeModel:
    """A ring of closings in the mirror plane k_z = 0 of spinless s and p_z states, filling 1.

    H = (1 + 2 radius_cos - cos a_1 - cos a_2 - cos a_3) sigma_z + sin a_3 sigma_y: the ring is
    cos a_1 + cos a_2 = 2 radius_cos in the plane a_3 = 0, where s is even and p_z odd under the
    mirror. hybridise sigma_x breaks inversion and the mirror, and opens a gap.
    Model of Kim, Wieder, Kane, Rappe, PRL 115, 036806 (2015) and Yu, Weng, Fang, Dai,
    Hu, PRL 115, 036807 (2015).
    """
    m = 1 + 2 * radius_cos
    x, y, z = SIGMA
    terms, both = Terms(2), slice(0, 2)
    terms.add_onsite(both, m * z + hybridise * x)
    for axis in range(3):
        cell = [0, 0, 0]
        cell[axis] = 1
        terms.add(cell, both, both, -z / 2 + (y / 2j if axis == 2 else 0 * y))
    r_cells, h_r = terms.arrays()
    basis = build_basis([("X1", ORIGIN, "s"), ("X1", ORIGIN, "pz")], spinful=False)
    crystal = Crystal(np.diag([4.0, 4.0, 5.0]), ("Ca",), np.zeros((1, 3)))
    return LatticeModel("nodal_ring", crystal, basis, r_cells, h_r, 1, False, ORIGIN)


def magnetic_ring(*, radius_cos: float = 0.5, field: float = 3.0) -> LatticeModel:
    """The ring of `nodal_ring` in the lower one of two spin species split by a field along z.

    Spin-up functions lie `field` above the spin-down ones and are coupled to them by spin-orbit
    terms that the mirror k_z -> -k_z allows: s and p_z of opposite spin have the same mirror
    eigenvalue. Time reversal is broken; the mirror alone holds the ring. Filling 1.
    """
    ring = nodal_ring(radius_cos=radius_cos)
    terms, both = Terms(4), slice(0, 4)
    order = [0, 2, 1, 3]  # (species, spin) from (spin, species)
    for r_cell, block in zip(ring.r_cells, ring.h_r, strict=True):
        if tuple(r_cell) >= HOME:
            whole = np.kron(np.eye(2), block)[np.ix_(order, order)]
            terms.add(r_cell, both, both, whole if r_cell.any() else whole / 2)
    terms.add_onsite(both, np.kron(np.eye(2), np.diag([field, -field])))
    # sin a_1 x (s up, p_z down): even under the mirror, which acts as -i sigma_z (x) parity
    spin_orbit = np.zeros((4, 4), dtype=complex)
    spin_orbit[0, 3] = spin_orbit[3, 0] = 0.2
    spin_orbit[1, 2] = spin_orbit[2, 1] = 0.2
    terms.add((1, 0, 0), both, both, spin_orbit / 2j)
    r_cells, h_r = terms.arrays()
    basis = build_basis([("X1", ORIGIN, "s"), ("X1", ORIGIN, "pz")])
    return LatticeModel("magnetic_ring", ring.crystal, basis, r_cells, h_r, 1, True, ORIGIN)
