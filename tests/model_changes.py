"""Changes of description that leave the physics of a lattice model alone.

Each takes a `LatticeModel` and returns another one of the same crystal, told differently: another
cell, origin, order, home cell or orbital frame. An index that notices is wrong.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from lattice_models import LatticeModel
from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.invariants.parity import compute_parity
from topovet.invariants.results import ParityWitness
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.symmetry.inversion import build_inversion


def parity_of(
    model: LatticeModel, *, centre: Sequence[float] | None = None, kramers: bool | None = None
) -> ParityWitness:
    """The parity witness about the model's centre; Kramers pairs unless the model is spinless."""
    bloch = build_bloch_sum(model.tight_binding())
    fixed = np.array(model.centre if centre is None else centre, dtype=float)
    inversion = build_inversion(model.basis, model.crystal, fixed)
    pairs = model.spinful if kramers is None else kramers
    return compute_parity(bloch, inversion, model.filling, model.crystal.periodic, kramers=pairs)


def with_cell(model: LatticeModel, unimodular: IntArray) -> LatticeModel:
    """New lattice vectors A' = M A (rows), |det M| = 1.

    x = f A = f' A' gives f' = f M^-1 for positions and R alike; k, which pairs with R, turns into
    k' = k M^T, and so do the weak indices: nu' = M nu modulo 2.
    """
    inverse = np.round(np.linalg.inv(unimodular)).astype(np.int64)
    crystal = Crystal(
        unimodular @ model.crystal.cell,
        model.crystal.symbols,
        model.crystal.positions_frac @ inverse,
        model.crystal.periodic,
    )
    x, y, z = (np.array(model.centre) @ inverse).tolist()
    return replace(
        model,
        crystal=crystal,
        basis=_with_positions(model.basis, model.basis.positions_frac @ inverse),
        r_cells=model.r_cells @ inverse,
        centre=(x, y, z),
    )


def with_origin(model: LatticeModel, shift_frac: FloatArray) -> LatticeModel:
    """Everything moved by one vector; H(R) does not know."""
    crystal = replace(model.crystal, positions_frac=model.crystal.positions_frac + shift_frac)
    x, y, z = (np.array(model.centre) + shift_frac).tolist()
    basis = _with_positions(model.basis, model.basis.positions_frac + shift_frac)
    return replace(model, crystal=crystal, basis=basis, centre=(x, y, z))


def with_order(model: LatticeModel, order: IntArray) -> LatticeModel:
    """Orbitals in another order: new[i] = old[order[i]]."""
    h_r = model.h_r[:, order[:, None], order[None, :]]
    return replace(model, basis=model.basis.reordered(order), h_r=h_r)


def with_home_cells(model: LatticeModel, moves: IntArray) -> LatticeModel:
    """Orbital n taken from cell L_n instead: <m' 0|H|n' R> = <m 0|H|n R + L_n - L_m>."""
    blocks: dict[tuple[int, ...], ComplexArray] = {}
    for r_cell, block in zip(model.r_cells, model.h_r, strict=True):
        for m, n in zip(*np.nonzero(block), strict=True):
            r_new = tuple(int(x) for x in r_cell - moves[n] + moves[m])
            target = blocks.setdefault(r_new, np.zeros_like(block))
            target[m, n] += block[m, n]
    cells = sorted(blocks)
    return replace(
        model,
        basis=_with_positions(model.basis, model.basis.positions_frac + moves),
        r_cells=np.array(cells, dtype=np.int64),
        h_r=np.array([blocks[r] for r in cells]),
    )


def with_energy_shift(model: LatticeModel, shift_ev: float) -> LatticeModel:
    h_r = model.h_r.copy()
    h_r[~model.r_cells.any(axis=1)] += shift_ev * np.eye(model.n_orb)
    return replace(model, h_r=h_r)


def with_atomic_pair(
    model: LatticeModel, position: Sequence[float], harmonic: int, energy_ev: float
) -> LatticeModel:
    """One more orbital, spin up and down, coupled to nothing; filled if it lies below.

    It has a shell of its own, so that it may share its site with an orbital of the same name.
    """
    added = 2 if model.spinful else 1
    n = model.n_orb
    h_r = np.zeros((len(model.r_cells), n + added, n + added), dtype=complex)
    h_r[:, :n, :n] = model.h_r
    home = int(np.flatnonzero(~model.r_cells.any(axis=1))[0])
    h_r[home, n:, n:] = energy_ev * np.eye(added)
    row = np.zeros((1, 16))
    row[0, harmonic] = 1.0
    basis = OrbitalBasis(
        np.concatenate([model.basis.positions_frac, np.tile(position, (added, 1))]),
        np.concatenate([model.basis.harmonics, np.repeat(row, added, axis=0)]),
        np.concatenate([model.basis.spinors, np.eye(2, dtype=complex)[:added]]),
        (*model.basis.labels, *(f"X h{harmonic} {i}" for i in range(added))),
        np.append(model.basis.shells, [model.basis.shells.max() + 1] * added),
    )
    return replace(model, basis=basis, h_r=h_r, filling=model.filling + added)


def with_mixed_orbitals(model: LatticeModel, rng: np.random.Generator) -> LatticeModel:
    """Other functions on every site: a random rotation of its harmonics and of its spin frame.

    Rotations mix s with p freely, like hybrids, and differ from site to site; the basis says what
    the new functions are. The site's spatial orbitals must come as interlaced spin pairs.
    """
    n = model.n_orb
    u = np.zeros((n, n), dtype=complex)
    harmonics, spinors = np.zeros((n, 16)), np.zeros((n, 2), dtype=complex)
    sites, which = np.unique(model.basis.positions_frac, axis=0, return_inverse=True)
    for site in range(len(sites)):
        members = np.flatnonzero(which.reshape(-1) == site)
        orbital, _ = np.linalg.qr(rng.normal(size=(len(members) // 2,) * 2))
        spin = random_su2(rng)
        u[np.ix_(members, members)] = np.kron(orbital, spin)
        harmonics[members] = np.repeat(orbital.T @ model.basis.harmonics[members[::2]], 2, axis=0)
        spinors[members] = np.tile(spin.T, (len(members) // 2, 1))
    basis = replace(model.basis, harmonics=harmonics, spinors=spinors)
    return replace(model, basis=basis, h_r=u.conj().T @ model.h_r @ u)


def random_su2(rng: np.random.Generator) -> ComplexArray:
    """A rotation of a spin 1/2, evenly distributed (a point on the unit 3-sphere)."""
    a, b, c, d = (q := rng.normal(size=4)) / np.linalg.norm(q)
    return np.array([[a + 1j * b, c + 1j * d], [-c + 1j * d, a - 1j * b]])


def _with_positions(basis: OrbitalBasis, positions: FloatArray) -> OrbitalBasis:
    return replace(basis, positions_frac=positions)
