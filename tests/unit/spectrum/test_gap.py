"""The sampled gap against gaps known in closed form."""

from __future__ import annotations

import numpy as np
import pytest

from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.model.hamiltonian import build_model
from topovet.spectrum.eigen import (
    eigenstates,
    eigenvalues,
    mesh_eigenvalues,
    mesh_points,
    mesh_solves,
)
from topovet.spectrum.gap import choose_mesh, gap_status, sample_gap


def _shifted_cosine(mass: float, centre: np.ndarray) -> BlochSum:
    """Two bands ±(mass + sum_i (1 - cos 2 pi (k_i - centre_i))): gap 2 mass, at `centre` only."""
    r_cells = [np.zeros(3, int)]
    hops = [np.diag([mass + 3.0, -mass - 3.0]).astype(complex)]
    for axis in range(3):
        for sign in (1, -1):
            r_cell = np.zeros(3, int)
            r_cell[axis] = sign
            phase = np.exp(-2j * np.pi * sign * centre[axis])
            r_cells.append(r_cell)
            hops.append(np.diag([-0.5, 0.5]) * phase)
    return build_bloch_sum(build_model(np.array(r_cells), np.array(hops), spinful=True))


@pytest.mark.parametrize("mass", [0.3, 0.0031])
def test_minimum_between_mesh_points_is_found(mass: float) -> None:
    centre = np.array([0.137, 0.42, 0.881])
    bloch = _shifted_cosine(mass, centre)
    energies = mesh_eigenvalues(bloch, (6, 6, 6), even=False)
    gap = sample_gap(bloch, energies, 1)
    assert gap.direct_ev == pytest.approx(2 * mass, abs=1e-6)
    assert gap.indirect_ev == pytest.approx(2 * mass, abs=1e-6)
    np.testing.assert_allclose(gap.direct_k, centre - np.round(centre), atol=1e-3)
    assert gap.mesh_direct_ev > gap.direct_ev
    assert gap.status == "insulator"


def test_node_is_called_gapless() -> None:
    bloch = _shifted_cosine(0.0, np.array([0.137, 0.42, 0.881]))
    gap = sample_gap(bloch, mesh_eigenvalues(bloch, (6, 6, 6), even=False), 1)
    assert gap.status == "gapless"


@pytest.mark.parametrize(
    ("direct", "indirect", "status"),
    [
        (0.2, 0.1, "insulator"),
        (0.07, -0.3, "semimetal-direct-gap"),
        (5e-4, 5e-4, "unresolved"),
        (1e-6, -0.1, "gapless"),
    ],
)
def test_status(direct: float, indirect: float, status: str) -> None:
    assert gap_status(direct, indirect) == status


def test_mesh_follows_the_reciprocal_lengths() -> None:
    crystal = Crystal(np.diag([4.0, 8.0, 20.0]), ("X",), np.zeros((1, 3)), (True, True, False))
    n_1, n_2, n_3 = choose_mesh(crystal, "standard")
    assert n_3 == 1
    assert n_1 == 16  # 2 pi / 4 = 1.571 per angstrom, at most 0.1 apart
    assert n_2 == 8
    assert choose_mesh(crystal, "thorough")[0] == 32


def _random_bloch(seed: int, *, even: bool) -> BlochSum:
    rng = np.random.default_rng(seed)
    r_cells = rng.integers(-2, 3, (30, 3))
    h = rng.normal(size=(30, 4, 4)) + (0 if even else 1j) * rng.normal(size=(30, 4, 4))
    return build_bloch_sum(build_model(r_cells, h.astype(complex), spinful=False))


@pytest.mark.parametrize("even", [False, True])
@pytest.mark.parametrize("mesh", [(4, 6, 2), (5, 3, 7)])
def test_mesh_equals_scattered_points(even: bool, mesh: tuple[int, int, int]) -> None:
    bloch = _random_bloch(3, even=even)
    on_mesh = mesh_eigenvalues(bloch, mesh, even=even)
    scattered = eigenvalues(bloch, mesh_points(mesh))
    np.testing.assert_allclose(on_mesh.reshape(-1, 4), scattered, atol=1e-12)
    assert mesh_solves(mesh, even=even) <= np.prod(mesh)


def test_eigenstates_solve_the_eigenvalue_problem() -> None:
    bloch = _random_bloch(5, even=False)
    k_frac = np.random.default_rng(1).random((9, 3))
    energies, states = eigenstates(bloch, k_frac)
    np.testing.assert_allclose(bloch.at(k_frac) @ states, states * energies[:, None, :], atol=1e-12)
