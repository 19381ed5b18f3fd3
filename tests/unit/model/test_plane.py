"""Planes of k and the Fourier sum on them."""

from __future__ import annotations

import numpy as np
import pytest

from chern_models import random_model
from topovet.model.fourier import build_bloch_sum
from topovet.model.plane import KPlane, bloch_on_plane, coordinate_plane, invariant_planes


@pytest.mark.parametrize(
    "plane",
    [
        coordinate_plane(0, 0.5),
        coordinate_plane(1, 0.17),
        coordinate_plane(2, 0.0).turned(),
        KPlane("x=y", (0.0, 0.0, 0.0), (1, 1, 0), (0, 0, 1)),
        KPlane("skew", (0.1, -0.2, 0.3), (1, -2, 1), (0, 1, 3)),
    ],
    ids=lambda p: p.name,
)
def test_the_sum_on_a_plane_is_the_full_sum(plane: KPlane) -> None:
    bloch = build_bloch_sum(random_model(1, inversion=False).tight_binding())
    xy = np.random.default_rng(0).uniform(-1, 2, size=(20, 2))
    np.testing.assert_allclose(
        bloch_on_plane(bloch, plane).at(xy), bloch.at(plane.k_at(xy)), atol=1e-12
    )


def test_coordinate_planes_are_right_handed() -> None:
    for axis in range(3):
        plane = coordinate_plane(axis, 0.25)
        assert plane.origin[axis] == 0.25
        normal = np.cross(plane.across, plane.along)
        np.testing.assert_array_equal(normal, np.eye(3, dtype=int)[axis])
        assert plane.name == f"k{axis + 1}=0.25"


def test_invariant_planes() -> None:
    names = [plane.name for plane in invariant_planes((True, True, True))]
    assert names == ["k1=0", "k1=1/2", "k2=0", "k2=1/2", "k3=0", "k3=1/2"]
    assert [plane.name for plane in invariant_planes((True, False, True))] == ["k2=0"]
    with pytest.raises(ValueError, match="at least two periodic directions"):
        invariant_planes((True, False, False))
