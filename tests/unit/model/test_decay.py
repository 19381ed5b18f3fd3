"""Fall-off with the true distance between functions, not with the label R."""

from __future__ import annotations

import numpy as np
import pytest

from topovet.model.crystal import Crystal
from topovet.model.decay import measure_decay
from topovet.model.hamiltonian import TightBindingModel, build_model

CRYSTAL = Crystal(np.diag([4.0, 4.0, 20.0]), ("X",), np.zeros((1, 3)))
SITES = np.array([[0, 0, 0.05], [0, 0, 0.95]])


def _model(r_cells: list[list[int]], h_r: list[list[list[complex]]]) -> TightBindingModel:
    return build_model(np.array(r_cells), np.array(h_r, dtype=complex), spinful=False)


def test_distance_is_that_between_the_sites() -> None:
    """Function 1 of the cell below is 2 angstrom away, function 1 of the same cell 18."""
    model = _model([[0, 0, 0], [0, 0, -1]], [[[9, 0.01], [0.01, 9]], [[0, 1.5], [0, 0]]])
    profile = measure_decay(model, CRYSTAL, SITES, (4, 4, 2))
    by_distance = dict(zip(profile.distances_ang, profile.largest_mev, strict=True))
    assert by_distance[2.125] == pytest.approx(1500)
    assert by_distance[18.125] == pytest.approx(10)
    assert profile.largest_hopping_mev == pytest.approx(1500)
    assert profile.rim_ang == pytest.approx(0.9 * 8)  # shortest supercell vector 16 angstrom
    assert profile.rim_mev == pytest.approx(10)
    assert profile.positions == "declared sites"


def test_without_sites_the_lattice_vector_is_the_distance() -> None:
    model = _model([[0, 0, 0], [1, 0, 0]], [[[1.0]], [[0.2]]])
    profile = measure_decay(model, CRYSTAL, None, None)
    assert profile.distances_ang == (0.125, 4.125)
    assert profile.largest_mev == pytest.approx((1000, 200))
    assert profile.rim_mev is None
    assert profile.positions == "lattice vectors"


def test_vacuum_direction_neither_counts_nor_limits() -> None:
    film = Crystal(CRYSTAL.cell, ("X",), np.zeros((1, 3)), (True, True, False))
    model = _model([[0, 0, 0]], [[[1, 0.3], [0.3, 1]]])
    profile = measure_decay(model, film, SITES, (6, 6, 1))
    assert profile.distances_ang == (0.125,)  # both functions at one point of the plane
    assert profile.rim_ang == pytest.approx(0.9 * 12)
