"""Bands along the special points, in the cell that is given."""

from __future__ import annotations

import numpy as np
import pytest

from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import build_model
from topovet.spectrum.path import compute_bands

FCC = 3.2 * np.array([[0.0, 1, 1], [1, 0, 1], [1, 1, 0]])
ONE_BAND = build_bloch_sum(
    build_model(np.array([[0, 0, 0], [1, 0, 0]]), np.array([[[0.0 + 0j]], [[-1.0]]]), spinful=False)
)


def test_special_points_of_an_fcc_cell_are_where_textbooks_put_them() -> None:
    """|Gamma X| = 2 pi / a and |Gamma L| = sqrt(3) pi / a (Setyawan and Curtarolo, Comput. Mater.
    Sci. 49, 299 (2010), doi:10.1016/j.commatsci.2010.05.010, figure 2)."""
    path = compute_bands(ONE_BAND, Crystal(FCC, ("X",), np.zeros((1, 3))))
    a = 6.4
    reciprocal = 2 * np.pi * np.linalg.inv(FCC).T
    length = dict(
        zip(
            path.labels,
            np.linalg.norm(path.k_frac[list(path.label_index)] @ reciprocal, axis=1),
            strict=True,
        )
    )
    assert length["G"] == pytest.approx(0.0)
    assert length["X"] == pytest.approx(2 * np.pi / a)
    assert length["L"] == pytest.approx(np.sqrt(3) * np.pi / a)


def test_skewed_cell_gives_the_same_points_in_space() -> None:
    skew = np.array([[1, 1, 0], [0, 1, 0], [0, 0, 1]])
    crystal, other = (Crystal(c, ("X",), np.zeros((1, 3))) for c in (FCC, skew @ FCC))
    lengths = []
    for one in (crystal, other):
        path = compute_bands(ONE_BAND, one)
        points = path.k_frac[list(path.label_index)] @ one.reciprocal
        lengths.append(sorted(set(np.linalg.norm(points, axis=1).round(6))))
    assert lengths[0] == lengths[1]


def test_distance_is_arc_length_and_stands_still_at_a_jump() -> None:
    crystal = Crystal(FCC, ("X",), np.zeros((1, 3)))
    path = compute_bands(ONE_BAND, crystal)
    step = np.linalg.norm(np.diff(path.k_frac @ crystal.reciprocal, axis=0), axis=1)
    climbed = np.diff(path.distance)
    moving = climbed > 1e-9
    np.testing.assert_allclose(climbed[moving], step[moving], rtol=1e-9)
    assert climbed.min() >= -1e-12


def test_two_dimensions_stay_in_the_plane() -> None:
    hexagonal = np.array([[4.3, 0, 0], [-2.15, 3.7239, 0], [0, 0, 16.0]])
    crystal = Crystal(hexagonal, ("X",), np.zeros((1, 3)), (True, True, False))
    path = compute_bands(ONE_BAND, crystal)
    assert np.all(path.k_frac[:, 2] == 0)
    assert set(path.labels) == {"G", "M", "K"}
