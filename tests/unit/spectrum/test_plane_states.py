"""Occupied states on a plane: what they cost, the atomic gauge, where the gap is narrow."""

from __future__ import annotations

import numpy as np
import pytest

from chern_models import qi_wu_zhang, random_model
from lattice_models import kane_mele
from topovet.errors import ConvergenceError
from topovet.model.fourier import build_bloch_sum
from topovet.model.plane import coordinate_plane
from topovet.spectrum.eigen import mesh_points
from topovet.spectrum.plane_states import PlaneStates, narrow_spots

MODEL = random_model(3, inversion=False)
BLOCH = build_bloch_sum(MODEL.tight_binding())
PLANE = coordinate_plane(0, 0.3)


def test_states_are_occupied_and_counted() -> None:
    states = PlaneStates(BLOCH, PLANE, 4, max_solves=100)
    xy = np.random.default_rng(0).random((30, 2))
    kets = states.states_at(xy)
    assert kets.shape == (30, 8, 4)
    h = BLOCH.at(PLANE.k_at(xy))
    energies = np.linalg.eigvalsh(h)
    restricted = kets.conj().swapaxes(1, 2) @ h @ kets
    np.testing.assert_allclose(np.linalg.eigvalsh(restricted), energies[:, :4], atol=1e-10)
    gaps = energies[:, 4] - energies[:, 3]
    np.testing.assert_allclose(states.visited[1], gaps, atol=1e-10)
    np.testing.assert_allclose(states.gaps_at(xy), gaps, atol=1e-10)
    assert states.n_solves == 60
    gap, where = states.narrowest()
    assert gap == pytest.approx(gaps.min(), abs=1e-10)
    np.testing.assert_array_equal(where, xy[gaps.argmin()])


def test_the_budget_is_kept() -> None:
    states = PlaneStates(BLOCH, PLANE, 4, max_solves=10)
    states.states_at(np.zeros((8, 2)))
    with pytest.raises(ConvergenceError, match="budget of 10"):
        states.gaps_at(np.zeros((3, 2)))
    assert states.n_solves == 8


def test_nothing_visited_has_no_gap() -> None:
    assert PlaneStates(BLOCH, PLANE, 4, max_solves=10).narrowest() == (np.inf, (0.0, 0.0))


def test_atomic_gauge_closes_with_its_phase() -> None:
    """u(k + G) = exp(-2 pi i G.tau) u(k) up to a rotation of the occupied states."""
    tau = np.random.default_rng(1).random((8, 3))
    states = PlaneStates(BLOCH, PLANE, 4, max_solves=10, positions_frac=tau)
    xy, turns = np.array([[0.2, 0.7]]), np.array([1.0, 2.0])
    closing = states.closing(turns)
    assert closing is not None
    overlap = (closing[:, None] * states.states_at(xy)[0]).conj().T @ states.states_at(xy + turns)[
        0
    ]
    np.testing.assert_allclose(np.linalg.svd(overlap, compute_uv=False), 1.0, atol=1e-10)


@pytest.mark.parametrize("lambda_v", [0.0, 0.1, 0.3, 0.311])
def test_narrow_spots_are_the_corners(lambda_v: float) -> None:
    """From a mesh that does not hold K: the gap within 5 %, and the narrower the closer to K."""
    model = kane_mele(lambda_v=lambda_v)
    bloch = build_bloch_sum(model.tight_binding())
    states = PlaneStates(bloch, coordinate_plane(2, 0.0), 2, max_solves=1000)
    states.states_at(mesh_points((7, 7)))
    spots = narrow_spots(states)
    corners = np.array([[1 / 3, 1 / 3], [2 / 3, 2 / 3]])
    first = int(spots.gaps_ev.argmin())
    nearest = np.abs(spots.xy[first] - corners).max(axis=1).min()
    expected = abs(6 * np.sqrt(3) * 0.06 - 2 * lambda_v)
    assert nearest < max(1e-4, 0.05 * expected)
    assert states.narrowest()[0] == spots.gaps_ev[first] == pytest.approx(expected, rel=0.05)
    assert states.n_solves < 49 + 500


@pytest.mark.parametrize("gap_ev", [0.3, 0.03, 0.003])
def test_widths_are_those_of_the_cone(gap_ev: float) -> None:
    """Qi-Wu-Zhang near m = 2: at M the gap is sqrt(gap^2 + (4 pi q)^2), q in plane coordinates."""
    states = PlaneStates(
        build_bloch_sum(qi_wu_zhang(m=2 + gap_ev / 2).tight_binding()),
        coordinate_plane(2, 0.0),
        1,
        max_solves=1000,
    )
    states.states_at(mesh_points((7, 7)))
    spots = narrow_spots(states)
    first = int(spots.gaps_ev.argmin())
    np.testing.assert_allclose(spots.xy[first], 0.5, atol=0.02 * gap_ev)
    assert spots.widths[first] == pytest.approx(gap_ev / (4 * np.pi), rel=0.1)


def test_a_closing_is_followed_down() -> None:
    states = PlaneStates(
        build_bloch_sum(qi_wu_zhang(m=2.0).tight_binding()),
        coordinate_plane(2, 0.0),
        1,
        max_solves=1000,
    )
    states.states_at(mesh_points((7, 7)))  # M = (1/2, 1/2) is not on it
    narrow_spots(states)
    assert states.narrowest()[0] < 1e-4
