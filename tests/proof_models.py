"""Hamiltonians for the tests of proofs: random ones, and ones with gaps known in closed form."""

from __future__ import annotations

import numpy as np

from topovet.arrays import FloatArray
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel, build_model
from topovet.spectrum.proof.prove import ProvenHamiltonian
from topovet.spectrum.proof.symmetry_use import Images, no_images

SIGMA = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])
ALL = (True, True, True)
OBLIQUE = np.array([[3.0, 0.2, 0.1], [-1.0, 3.5, 0.0], [0.4, 0.9, 4.0]])


def random_model(
    seed: int, n_orb: int, *, level_ev: float = 0.0, reach: int = 1, planar: bool = False
) -> TightBindingModel:
    """Random hopping to the near cells on top of levels `level_ev` apart."""
    rng = np.random.default_rng(seed)
    r_cells = np.array([np.subtract(r, reach) for r in np.ndindex((2 * reach + 1,) * 3)])
    if planar:
        r_cells = r_cells[r_cells[:, 2] == 0]
    h_r = rng.normal(size=(len(r_cells), n_orb, n_orb, 2)) @ np.array([1, 1j])
    h_r *= np.exp(-1.5 * np.linalg.norm(r_cells, axis=1))[:, None, None]
    h_r[np.all(r_cells == 0, axis=1)] += level_ev * np.diag(np.arange(n_orb))
    return build_model(r_cells, h_r, spinful=False)


def with_positions(tau: FloatArray) -> TightBindingModel:
    """Functions at tau with hopping exp(-6 d) over the distance d, in a cubic cell of size 1."""
    reach = 7
    r_cells = np.array([np.subtract(r, reach) for r in np.ndindex((2 * reach + 1,) * 3)])
    d = r_cells[:, None, None, :] + tau[None, None] - tau[None, :, None]
    return build_model(r_cells, np.exp(-6 * np.linalg.norm(d, axis=-1)) + 0j, spinful=False)


def proven(
    model: TightBindingModel,
    *,
    crystal: Crystal | None = None,
    images: Images | None = None,
) -> ProvenHamiltonian:
    """A model to be proved; in an oblique cell, without symmetries, unless told otherwise."""
    crystal = crystal or Crystal(OBLIQUE, ("H",), np.zeros((1, 3)), ALL)
    return ProvenHamiltonian(model, build_bloch_sum(model), crystal, images or no_images())


def weyl_pair(half_distance: float, mass: float = 0.0) -> TightBindingModel:
    """Two bands with Weyl points at k = (0, 0, ±half_distance), a gap 2 mass in place of each.

    d = (sin a_1, sin a_2, cos a_3 - cos(2 pi half_distance) + 2 - cos a_1 - cos a_2), a = 2 pi k:
    for a small half distance the gap between the points is tiny as well. The mass couples a copy
    of opposite chirality: E^2 = d^2 + mass^2.
    """
    terms: dict[tuple[int, int, int], np.ndarray] = {}

    def add(r_cell: tuple[int, int, int], block: np.ndarray) -> None:
        terms[r_cell] = terms.get(r_cell, 0) + block

    tau_z, tau_x = np.diag([1.0, -1.0]), np.array([[0, 1], [1, 0]])
    onsite = (2 - np.cos(2 * np.pi * half_distance)) * SIGMA[2]
    add((0, 0, 0), np.kron(tau_z, onsite) + mass * np.kron(tau_x, np.eye(2)))
    for axis in range(3):
        plus = (int(axis == 0), int(axis == 1), int(axis == 2))
        minus = (-plus[0], -plus[1], -plus[2])
        hop = SIGMA[2] / 2 if axis == 2 else SIGMA[axis] / 2j - SIGMA[2] / 2
        add(plus, np.kron(tau_z, hop))
        add(minus, np.kron(tau_z, hop.conj().T))
    return build_model(np.array(list(terms)), np.array(list(terms.values())), spinful=True)


def hidden_pair(centre: FloatArray, mass: float) -> TightBindingModel:
    """A cone of gap 2 mass in one pair of bands, under a flat gap of 0.07 eV in another pair.

    ±|d|, d = (6 sin a_1, 6 sin a_2, mass + 3 sum_i (1 - cos a_i)), a = 2 pi (k - centre), beside
    ±(0.035 + 0.1 sum_i (1 - cos 2 pi k_i)): away from the tip of the cone the gap is everywhere
    that of the other pair, so that no sampled value, and no slope, leads to it.
    """
    onsite = np.zeros((4, 4), complex)
    onsite[:2, :2] = (mass + 9.0) * SIGMA[2]
    onsite[2:, 2:] = (0.035 + 0.3) * SIGMA[2]
    r_cells, hops = [np.zeros(3, int)], [onsite]
    for axis in range(3):
        hop = np.zeros((4, 4), complex)
        hop[:2, :2] = -1.5 * SIGMA[2] + (0 if axis == 2 else 3.0 / 1j * SIGMA[axis])
        hop *= np.exp(-2j * np.pi * centre[axis])
        hop[2:, 2:] = -0.05 * SIGMA[2]
        r_cell = np.eye(3, dtype=int)[axis]
        r_cells += [r_cell, -r_cell]
        hops += [hop, hop.conj().T]
    return build_model(np.array(r_cells), np.array(hops), spinful=True)


def plain_energies(model: TightBindingModel, k_frac: FloatArray) -> FloatArray:
    """(n, n_orb) by a direct sum over R."""
    phases = np.exp(2j * np.pi * (k_frac @ model.r_cells.T))
    flat = phases @ model.h_r.reshape(model.n_r, -1)
    return np.asarray(np.linalg.eigvalsh(flat.reshape(-1, model.n_orb, model.n_orb)))
