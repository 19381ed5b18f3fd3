"""Which planes of k an operation makes of which."""

from __future__ import annotations

import numpy as np
import pytest

from space_group_samples import sample_group
from topovet.model.plane import KPlane, coordinate_plane, invariant_planes
from topovet.symmetry.equivalent_planes import group_planes, plane_key

SIX = invariant_planes((True, True, True))


def turns(number: int) -> list[np.ndarray]:
    return [np.round(np.linalg.inv(w)).astype(int) for w in sample_group(number).rotations]


@pytest.mark.parametrize(
    ("number", "groups"),
    [
        (2, []),
        (47, []),
        (75, [("k1=0", "k2=0"), ("k1=1/2", "k2=1/2")]),
        (221, [("k1=0", "k2=0", "k3=0"), ("k1=1/2", "k2=1/2", "k3=1/2")]),
        (225, [("k1=0", "k2=0", "k3=0"), ("k1=1/2", "k2=1/2", "k3=1/2")]),
        (147, [("k1=0", "k2=0"), ("k1=1/2", "k2=1/2")]),  # three-fold: k1, k2, and k1 + k2
    ],
)
def test_invariant_planes_of_crystal_systems(number: int, groups: list[tuple[str, ...]]) -> None:
    assert list(group_planes(SIX, turns(number))) == groups


@pytest.mark.parametrize("number", [75, 146, 148, 166, 187, 194, 216, 221, 225, 229])
def test_planes_of_a_group_go_over_into_each_other(number: int) -> None:
    """By moving points of the first and looking where they lie: no use of normals."""
    by_name = {plane.name: plane for plane in SIX}
    grouped = group_planes(SIX, turns(number))
    assert grouped
    xy = np.random.default_rng(3).random((5, 2))
    for first, *others in grouped:
        k = by_name[first].k_at(xy)
        for other in others:
            axis, value = int(other[1]) - 1, 0.5 if other.endswith("1/2") else 0.0
            moved = [(k @ v)[:, axis] - value for v in turns(number)]
            assert any(np.abs(m - np.round(m)).max() < 1e-9 for m in moved)


def test_a_plane_is_known_whatever_spans_it() -> None:
    plane = coordinate_plane(2, 0.5)
    skewed = KPlane("", (0.3, 0.1, -0.5), (1, 2, 0), (0, -1, 0))
    assert plane_key(plane) == plane_key(skewed) == plane_key(plane.turned())
    assert plane_key(plane) != plane_key(coordinate_plane(2, 0.0))
