"""Newton descent: derivatives against differences, and minima known in closed form."""

from __future__ import annotations

import numpy as np
import pytest

from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.model.hamiltonian import build_model
from topovet.spectrum.descent import MULTIPLET, Objective, _local_model, descend
from topovet.spectrum.eigen import mesh_eigenvalues
from topovet.spectrum.gap import sample_gap


def _random_bloch(seed: int, n_orb: int) -> BlochSum:
    rng = np.random.default_rng(seed)
    r_cells = rng.integers(-2, 3, (20, 3))
    h = rng.normal(size=(20, n_orb, n_orb)) + 1j * rng.normal(size=(20, n_orb, n_orb))
    return build_bloch_sum(build_model(r_cells, h, spinful=False))


def _spin_doubled(bloch: BlochSum) -> BlochSum:
    """Every level twice at every k: H + H as one block matrix."""
    n, rows = bloch.n_orb, len(bloch.table)
    table = np.zeros((rows, 2 * n, 2 * n))
    table[:, :n, :n] = table[:, n:, n:] = bloch.table.reshape(rows, n, n)
    return BlochSum(bloch.r_half, table.reshape(rows, -1), 2 * n)


@pytest.mark.parametrize("weights", [(1, -1), (0, -1), (1, 0)])
@pytest.mark.parametrize("doubled", [False, True])
def test_derivatives_against_differences(weights: tuple[int, int], doubled: bool) -> None:
    single = _random_bloch(4, 5)
    bloch = _spin_doubled(single) if doubled else single
    objective = Objective(4 if doubled else 2, *weights)
    k, step = np.array([[0.13, 0.29, 0.71]]), 1e-5
    moved = np.concatenate([k, *(k + s * step * e for e in np.eye(3) for s in (1, -1))])
    value, slope, curve = _local_model(bloch, objective, moved, MULTIPLET)
    smooth = value**2 if objective.squared else value
    for i in range(3):
        plus, minus = 2 * i + 1, 2 * i + 2
        difference = (smooth[plus] - smooth[minus]) / (2 * step)
        assert slope[0, i] == pytest.approx(difference, rel=1e-5, abs=1e-5)
        second = (slope[plus] - slope[minus]) / (2 * step)
        np.testing.assert_allclose(curve[0, i], second, rtol=1e-4, atol=1e-3)


def test_second_derivatives_of_the_sum() -> None:
    bloch, k, step = _random_bloch(7, 3), np.array([[0.31, 0.12, 0.55]]), 1e-5
    i, j = np.triu_indices(3)
    for pair in range(6):
        e = np.eye(3)[j[pair]] * step
        difference = (bloch.gradient(k + e) - bloch.gradient(k - e))[0, i[pair]] / (2 * step)
        np.testing.assert_allclose(bloch.hessian(k)[0, pair], difference, atol=1e-5)


SIGMA = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])


def _hidden_cone(centre: np.ndarray, mass: float, decoy: float) -> BlochSum:
    """A narrow cone at `centre`, and a wide valley of gap 2 decoy at Gamma in two other bands.

    The first pair of bands is ±|d| with d = (6 sin a_1, 6 sin a_2, mass + 3 sum_i (1 - cos a_i)),
    a = 2 pi (k - centre): gap 2 mass at `centre`, and nowhere else less than 12 (the sines vanish
    at a_i = pi as well, where the cosines do not let d_3 be small). The second is
    ±(decoy + sum_i (1 - cos 2 pi k_i)).
    """
    onsite = np.zeros((4, 4), complex)
    onsite[:2, :2] = (mass + 9.0) * SIGMA[2]
    onsite[2:, 2:] = (decoy + 3.0) * SIGMA[2]
    r_cells, hops = [np.zeros(3, int)], [onsite]
    for axis in range(3):
        hop = np.zeros((4, 4), complex)
        hop[:2, :2] = -1.5 * SIGMA[2] + (0 if axis == 2 else 3.0 / 1j * SIGMA[axis])
        hop *= np.exp(-2j * np.pi * centre[axis])
        hop[2:, 2:] = -0.5 * SIGMA[2]
        r_cell = np.eye(3, dtype=int)[axis]
        r_cells += [r_cell, -r_cell]
        hops += [hop, hop.conj().T]
    return build_bloch_sum(build_model(np.array(r_cells), np.array(hops), spinful=True))


def test_narrow_cone_off_all_symmetry_lines() -> None:
    centre, mass = np.array([0.0398, 0.4453, 0.2117]), 0.002
    bloch = _hidden_cone(centre, mass, 0.035)
    mesh_energies = mesh_eigenvalues(bloch, (18, 18, 18), even=False)
    gap = sample_gap(bloch, mesh_energies, 2)
    assert gap.mesh_direct_ev == pytest.approx(0.07)  # the valley: the mesh does not see the cone
    assert gap.direct_ev == pytest.approx(2 * mass, rel=1e-6)
    np.testing.assert_allclose(gap.direct_k, centre - np.round(centre), atol=1e-5)


def test_closing_is_reached() -> None:
    bloch = _hidden_cone(np.array([0.0398, 0.4453, 0.2117]), 0.0, 0.035)
    found = descend(bloch, Objective(2, 1, -1), np.array([[0.05, 0.43, 0.2]]), max_rounds=40)
    assert found.values[0] < 1e-6
    assert found.n_solves <= 41
