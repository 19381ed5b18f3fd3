"""Lattice models without Fu-Kane indices: Chern, inversion-broken, doubled and mirror phases.

Conventions as in `lattice_models`. Where a paper's orbitals are of no concern the declared basis is
only nominal, which the docstring says.
"""

from __future__ import annotations

import numpy as np

from topovet.arrays import ComplexArray
from topovet.demo.changes import staggered
from topovet.demo.crystal_models import chern_stack, layered_bhz, snte
from topovet.demo.dirac_models import chiral_wilson_dirac, double_wilson_dirac
from topovet.demo.lattice import (
    IN_PLANE,
    SIGMA,
    VACUUM_ANGSTROM,
    LatticeModel,
    Terms,
    build_basis,
    with_onsite,
)
from topovet.demo.planar_models import haldane, qi_wu_zhang
from topovet.model.crystal import Crystal

__all__ = [
    "chern_stack",
    "chiral_wilson_dirac",
    "double_wilson_dirac",
    "haldane",
    "hofstadter",
    "layered_bhz",
    "qi_wu_zhang",
    "random_model",
    "snte",
    "snte_mirror",
    "staggered",
    "zeeman",
]


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


def zeeman(model: LatticeModel, field: float) -> LatticeModel:
    """field sigma_z on every orbital: time reversal is broken."""
    return with_onsite(model, field * np.kron(np.eye(model.n_orb // 2), SIGMA[2]))


def snte_mirror() -> ComplexArray:
    """Reflection x <-> y of `snte`, (12, 12): every site stays in its cell, so k does not enter.

    px and py change places; spin turns by pi about the normal (1, -1, 0)/sqrt(2), -i n.sigma.
    """
    swap = np.array([[1, 0, 0], [0, 0, 1], [0, 1, 0]])
    spin = -1j * (SIGMA[0] - SIGMA[1]) / np.sqrt(2)
    return np.asarray(np.kron(np.eye(2), np.kron(swap, spin)))


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
