"""Hybrids: orthonormal sets that the symmetry of their bonds permutes."""

from __future__ import annotations

from itertools import permutations, product

import numpy as np
import pytest

from topovet.arrays import FloatArray
from topovet.intake.wannier_input.angular import ANGULAR_NAMES, parse_angular
from topovet.model.hybrids import harmonic_coefficients
from topovet.model.real_harmonics import compute_harmonics, harmonic_rotation


def members(l: int) -> FloatArray:
    return np.array([harmonic_coefficients(l, mr + 1) for mr in range(len(ANGULAR_NAMES[l]))])


def octahedral() -> list[FloatArray]:
    """The 48 signed permutation matrices."""
    return [
        np.diag(signs) @ np.eye(3)[list(order)]
        for order in permutations(range(3))
        for signs in product((1.0, -1.0), repeat=3)
    ]


def about_z(steps: int, mirror: bool) -> FloatArray:
    c, s = np.cos(2 * np.pi * steps / 3), np.sin(2 * np.pi * steps / 3)
    return np.array([[c, -s, 0], [s, c, 0], [0, 0, -1 if mirror else 1]])


OCTAHEDRAL = octahedral()
TETRAHEDRAL = [r for r in OCTAHEDRAL if np.prod(r.sum(axis=0)) > 0]
D3H = [
    about_z(steps, mirror) @ np.diag([1.0, flip, 1.0])
    for steps in range(3)
    for mirror in (False, True)
    for flip in (1.0, -1.0)
]


@pytest.mark.parametrize("l", ANGULAR_NAMES)
def test_sets_are_orthonormal(l: int) -> None:
    functions = members(l)
    assert functions @ functions.T == pytest.approx(np.eye(len(functions)), abs=1e-14)


@pytest.mark.parametrize(
    ("l", "group", "n_kinds"),
    [(-1, [np.eye(3), np.diag([-1.0, 1, 1])], 1), (-2, D3H, 1), (-3, TETRAHEDRAL, 1),
     (-4, D3H, 2), (-5, OCTAHEDRAL, 1)],
)  # fmt: skip
def test_symmetry_of_the_bonds_permutes_the_set(
    l: int, group: list[FloatArray], n_kinds: int
) -> None:
    functions = members(l)
    reached = np.zeros((len(functions), len(functions)))
    for r in group:
        overlap = functions @ harmonic_rotation(r) @ functions.T
        assert overlap == pytest.approx(np.round(overlap), abs=1e-14)
        assert overlap.min() > -0.5  # a permutation, no sign anywhere
        assert np.round(overlap).sum(axis=0).tolist() == [1.0] * len(functions)
        reached += np.round(overlap)
    # every member reaches every other one of its kind (equatorial and axial ones differ)
    assert np.linalg.matrix_rank(reached) == n_kinds


@pytest.mark.parametrize(
    ("name", "direction"),
    [
        ("sp-1", [1, 0, 0]), ("sp-2", [-1, 0, 0]),
        ("sp2-1", [-1, 3**0.5, 0]), ("sp2-2", [-1, -(3**0.5), 0]), ("sp2-3", [1, 0, 0]),
        ("sp3-1", [1, 1, 1]), ("sp3-2", [1, -1, -1]),
        ("sp3-3", [-1, 1, -1]), ("sp3-4", [-1, -1, 1]),
        ("sp3d-3", [1, 0, 0]), ("sp3d-4", [0, 0, 1]), ("sp3d-5", [0, 0, -1]),
        ("sp3d2-1", [-1, 0, 0]), ("sp3d2-2", [1, 0, 0]), ("sp3d2-3", [0, -1, 0]),
        ("sp3d2-4", [0, 1, 0]), ("sp3d2-5", [0, 0, -1]), ("sp3d2-6", [0, 0, 1]),
    ],
)  # fmt: skip
def test_members_point_where_the_user_guide_says(name: str, direction: list[float]) -> None:
    ((l, mr),) = parse_angular(name)
    points = np.random.default_rng(0).normal(size=(2000, 3))
    aim = np.array(direction) / np.linalg.norm(direction)
    points = np.vstack([points / np.linalg.norm(points, axis=1)[:, None], aim])
    values = compute_harmonics(points) @ harmonic_coefficients(l, mr)
    assert values.argmax() == len(points) - 1


def test_plain_functions_are_single_harmonics() -> None:
    functions = np.vstack([members(l) for l in range(4)])
    assert functions.tolist() == np.eye(16).tolist()
