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
    here = _local_model(bloch, objective, moved, MULTIPLET)
    value, slope, curve = here.value, here.slope, here.curve
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


def _two_levels(onsite: np.ndarray, hops: dict[tuple[int, int, int], np.ndarray]) -> BlochSum:
    r_cells, h_r = [np.zeros(3, int)], [onsite.astype(complex)]
    for r_cell, hop in hops.items():
        r_cells += [np.array(r_cell), -np.array(r_cell)]
        h_r += [hop, hop.conj().T]
    return build_bloch_sum(build_model(np.array(r_cells), np.array(h_r), spinful=False))


def _camel_back(depth: float) -> BlochSum:
    """±f with f = 1 + g(a_1) + (1 - cos a_2) + 2 (1 - cos a_3) and, in u = 1 - cos a_1,
    g = -b u + u^2: Gamma is a saddle, and f is smallest at u = b/2, where g = -b^2/4."""
    b, one = 2 * np.sqrt(depth), SIGMA[2]
    # u^2 = 3/2 - 2 cos a + cos(2a)/2, and a hop h gives 2 h cos a
    hops = {
        (1, 0, 0): (b / 2 - 1.0) * one,
        (2, 0, 0): 0.25 * one,
        (0, 1, 0): -0.5 * one,
        (0, 0, 1): -1.0 * one,
    }
    return _two_levels((1 - b + 1.5 + 1 + 2) * one, {r: h.astype(complex) for r, h in hops.items()})


def _rashba_chain(t: float, alpha: float) -> BlochSum:
    """Levels 2t (1 - cos a_1) ± alpha sin a_1 + (1 - cos a_2) + (1 - cos a_3) over a flat pair at
    -1: degenerate at Gamma, with a minimum of 2t - sqrt(4 t^2 + alpha^2) at tan a_1 = alpha/2t
    (the lattice form of Bychkov and Rashba, J. Phys. C 17, 6039 (1984))."""
    upper, lower = np.diag([0, 0, 1, 1]), np.diag([1, 1, 0, 0])
    split = np.zeros((4, 4), complex)
    split[2:, 2:] = -0.5j * alpha * SIGMA[1]  # with its partner alpha sin a sigma_y
    hops = {(1, 0, 0): split - t * upper, (0, 1, 0): -0.5 * upper, (0, 0, 1): -0.5 * upper}
    onsite = (2 * t + 2) * upper - lower
    return _two_levels(onsite, {r: h.astype(complex) for r, h in hops.items()})


@pytest.mark.parametrize("depth", [0.3, 0.01, 3e-4])
@pytest.mark.parametrize("off", [0.0, 1e-7])
def test_a_saddle_is_left(depth: float, off: float) -> None:
    """Minima from 0.17 down to 0.03 of the zone beside it, from Gamma itself and from rounding."""
    start = np.array([[off, 0.0, 0.0]])
    found = descend(_camel_back(depth), Objective(1, 1, -1), start, max_rounds=14)
    assert found.values[0] == pytest.approx(2 * (1 - depth), rel=1e-9)
    assert 1 - np.cos(2 * np.pi * found.k_frac[0, 0]) == pytest.approx(depth**0.5, rel=1e-3)


@pytest.mark.parametrize("alpha", [0.9, 0.3])
@pytest.mark.parametrize("weights", [(1, 0), (1, -1)])
def test_a_kink_is_left(alpha: float, weights: tuple[int, int]) -> None:
    bloch, gamma = _rashba_chain(1.0, alpha), np.zeros((1, 3))
    found = descend(bloch, Objective(2, *weights), gamma, max_rounds=14)
    lowest = 2 - np.sqrt(4 + alpha**2) + (1 if weights == (1, -1) else 0)
    assert found.values[0] == pytest.approx(lowest, rel=1e-9)


def test_a_minimum_at_a_symmetric_point_costs_nothing_more() -> None:
    found = descend(_rashba_chain(1.0, 0.0), Objective(2, 1, -1), np.zeros((1, 3)), max_rounds=14)
    assert (found.values[0], found.n_solves) == (pytest.approx(1.0), 1)
