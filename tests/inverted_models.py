"""Random Hamiltonians that have an inversion by construction, and noise that has none.

The operator is drawn first, with arbitrary unitary blocks between the sites, and the Hamiltonian
averaged over it with `inverted_hopping`, whose formula `tests/unit/symmetry/test_inversion.py`
tests on its own. Nothing of the inference is used.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel, build_model
from topovet.model.nearest_image import nearest_images
from topovet.symmetry.inversion import inverted_hopping, moved_hopping
from topovet.symmetry.results import InversionOperator

DECAY_ANG = 1.5
SPACING_ANG = 1.2


@dataclass(frozen=True, slots=True, eq=False)
class InvertedModel:
    """A Hamiltonian with its inversion: positions (n_orb, 3) in the cells that R = 0 refers to."""

    model: TightBindingModel
    crystal: Crystal
    positions_frac: FloatArray
    operator: InversionOperator


def random_inverted_model(
    rng: np.random.Generator,
    functions: list[tuple[int, bool]],
    *,
    cell: FloatArray,
    centre: FloatArray,
    spinful: bool,
    radius: int = 1,
    move_homes: bool = False,
) -> InvertedModel:
    """Sites with so many orbitals each; True makes a pair of sites, False one on a centre.

    Parameters
    ----------
    functions
        (orbitals, paired) for each site or pair of sites; spin doubles the orbitals.
    cell, centre
        (3, 3) angstrom and (3,) fractional.
    radius
        R vectors up to this many cells along each axis.
    move_homes
        Count functions from random cells, as Wannier90 may.
    """
    sites, sizes, partner, cells = _sites(rng, functions, centre, cell)
    n_spin = 2 if spinful else 1
    site_of = np.repeat(np.arange(len(sizes)), np.array(sizes) * n_spin)
    n_orb = len(site_of)
    homes = rng.integers(0, 2, size=(n_orb, 3)) if move_homes else np.zeros((n_orb, 3), int)
    if spinful:
        homes[1::2] = homes[::2]
    matrix = _blocks(rng, sizes, partner, site_of, n_spin)
    still = InversionOperator(np.asarray(centre), matrix, cells[site_of], np.zeros_like(homes))
    positions = sites[site_of]
    r_cells = np.array([np.subtract(r, radius) for r in np.ndindex(*[2 * radius + 1] * 3)])
    reach = r_cells[:, None, None, :] + positions[None, None, :, :] - positions[None, :, None, :]
    h_r = rng.normal(size=(len(r_cells), n_orb, n_orb, 2)) @ np.array([1, 1j])
    h_r *= np.exp(-np.linalg.norm(reach @ cell, axis=-1) / DECAY_ANG)
    first = build_model(r_cells, h_r, spinful=spinful)
    r_new, h_new = inverted_hopping(first, still)
    r_both = np.concatenate([first.r_cells, r_new])
    both = np.concatenate([first.h_r, h_new]) / 2
    whole = build_model(r_both, both, spinful=spinful)
    # function n counted from cell h_n instead of its site's: H_mn(R) moves to R + h_m - h_n
    model = build_model(*moved_hopping(whole.r_cells, whole.h_r, homes), spinful=spinful)
    operator = InversionOperator(still.centre_frac, matrix, cells[site_of] - homes, homes)
    return InvertedModel(model, Crystal(cell, (), ()), positions + homes, operator)


def _sites(
    rng: np.random.Generator,
    functions: list[tuple[int, bool]],
    centre: FloatArray,
    cell_ang: FloatArray,
) -> tuple[FloatArray, list[int], list[int], IntArray]:
    """Positions, sizes, partners and image cells T of the sites: 2c - x_s = x_p(s) + T_s."""
    positions, sizes, partner, cells = [], [], [], []
    halves = [np.array(h) / 2 for h in np.ndindex(2, 2, 2)]
    rng.shuffle(halves)
    for n, paired in functions:
        if not paired:
            half = halves.pop()
            partner.append(len(positions))
            positions.append(centre + half)
            cells.append(-2 * half)
            sizes.append(n)
            continue
        offset = _free_place(rng, np.array(positions).reshape(-1, 3) - centre, cell_ang)
        cell = rng.integers(0, 2, 3)
        partner += [len(positions) + 1, len(positions)]
        positions += [centre + offset, centre - offset - cell]
        cells += [cell, cell]
        sizes += [n, n]
    return np.array(positions), sizes, partner, np.round(cells).astype(np.int64)


def _free_place(rng: np.random.Generator, taken: FloatArray, cell_ang: FloatArray) -> FloatArray:
    """A point off every centre and at least SPACING_ANG from what is taken, and from its image."""
    while True:
        offset = (0.15 + 0.2 * rng.random(3)) * rng.choice([-1, 1], 3)
        others = np.concatenate([taken, [-offset]])
        if nearest_images(others - offset, cell_ang)[1].min() > SPACING_ANG:
            return np.asarray(offset)


def _blocks(
    rng: np.random.Generator, sizes: list[int], partner: list[int], site_of: IntArray, n_spin: int
) -> ComplexArray:
    """A unitary P with P^2 = 1 that connects each site with its partner and leaves spin alone."""
    matrix = np.zeros((len(site_of),) * 2, dtype=complex)
    for s, other in enumerate(partner):
        if other < s:
            continue
        q = random_unitary(rng, sizes[s])
        if other == s:
            q = q * rng.choice([-1.0, 1.0], sizes[s]) @ q.conj().T
        block = np.kron(q, np.eye(n_spin))
        here, there = np.flatnonzero(site_of == s), np.flatnonzero(site_of == other)
        matrix[np.ix_(there, here)] = block
        matrix[np.ix_(here, there)] = block.conj().T
    return matrix


def random_unitary(rng: np.random.Generator, n: int) -> ComplexArray:
    q, _ = np.linalg.qr(rng.normal(size=(n, n, 2)) @ np.array([1, 1j]))
    return np.asarray(q)


def with_noise(
    model: TightBindingModel, size_ev: float, rng: np.random.Generator
) -> TightBindingModel:
    """Gaussian noise on every element of every H(R): Hermitian, and with no other symmetry.

    The mean of |delta H_mn(R)|^2 is size_ev^2 for each R, m, n. It does not fall off with
    distance, so on H(k) it adds up to about size_ev sqrt(n_r) for each element.
    """
    noise = rng.normal(size=(*model.h_r.shape, 2)) @ np.array([1, 1j]) * size_ev / 2
    noise = noise + noise[::-1].conj().transpose(0, 2, 1)
    return TightBindingModel(model.r_cells, model.h_r + noise, model.spinful)
