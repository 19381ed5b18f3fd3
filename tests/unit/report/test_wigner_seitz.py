"""The Brillouin zone of the textbook lattices (Ashcroft and Mermin, Solid State Physics, ch. 5)."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial import ConvexHull

from topovet.report.figures.wigner_seitz import brillouin_zone, nearest_images

CUBIC = np.eye(3)
BODY_CENTRED = np.array([[-1, 1, 1], [1, -1, 1], [1, 1, -1]]) / 2
FACE_CENTRED = np.array([[0, 1, 1], [1, 0, 1], [1, 1, 0]]) / 2
HEXAGONAL = np.array([[1, 0, 0], [-0.5, np.sqrt(3) / 2, 0], [0, 0, 1.3]])

# lattice that the zone is the cell of: faces, corners, edges
SHAPES = {
    "cube": (CUBIC, 6, 8, 12),
    "rhombic dodecahedron": (FACE_CENTRED, 12, 14, 24),
    "truncated octahedron": (BODY_CENTRED, 14, 24, 36),
    "hexagonal prism": (HEXAGONAL, 8, 12, 18),
}


@pytest.mark.parametrize("name", SHAPES)
def test_textbook_shapes(name: str) -> None:
    lattice, faces, corners, edges = SHAPES[name]
    zone = brillouin_zone(lattice)
    assert len(zone.faces) == faces
    assert len(zone.vertices) == corners
    assert len(zone.edges()) == edges
    assert all(len(sides) == 2 for _, _, sides in zone.edges())


def test_hexagon_in_two_dimensions() -> None:
    zone = brillouin_zone(HEXAGONAL[:2, :2])
    assert zone.faces == ()
    assert len(zone.vertices) == 6
    assert np.allclose(np.linalg.norm(zone.vertices, axis=1), 1 / np.sqrt(3))


@st.composite
def _bases(draw: st.DrawFn) -> np.ndarray:
    numbers = st.floats(-1, 1).map(lambda x: round(x, 3))
    matrix = np.array(draw(st.lists(numbers, min_size=9, max_size=9))).reshape(3, 3)
    return np.asarray(matrix + 1.6 * np.eye(3))


@settings(max_examples=15, deadline=None)
@given(_bases())
def test_volume_is_that_of_the_cell(basis: np.ndarray) -> None:
    zone = brillouin_zone(basis)
    assert np.isclose(ConvexHull(zone.vertices).volume, abs(np.linalg.det(basis)))


@settings(max_examples=15, deadline=None)
@given(_bases(), st.lists(st.integers(-2, 2), min_size=3, max_size=3))
def test_a_skew_basis_gives_the_same_zone(basis: np.ndarray, skew: list[int]) -> None:
    mixed = basis.copy()
    mixed[0] += skew[0] * basis[1] + skew[1] * basis[2]
    mixed[1] += skew[2] * basis[2]
    one, other = brillouin_zone(basis), brillouin_zone(mixed)
    assert len(one.vertices) == len(other.vertices)
    assert np.isclose(one.radius, other.radius)


@pytest.mark.parametrize("name", SHAPES)
def test_images_of_trim_lie_on_the_surface(name: str) -> None:
    lattice = SHAPES[name][0]
    zone = brillouin_zone(lattice)
    for half in itertools.product((0, 0.5), repeat=3):
        images = nearest_images(np.array(half) @ lattice, lattice)
        reach = (images @ zone.normals.T / zone.offsets).max(axis=1)
        assert np.allclose(reach, 1 if any(half) else 0)
        assert np.allclose((images - np.array(half) @ lattice) @ np.linalg.inv(lattice) % 1 % 1, 0)


def test_a_corner_of_the_cube_has_eight_images() -> None:
    assert len(nearest_images(np.full(3, 0.5), CUBIC)) == 8


def test_exit_distance() -> None:
    zone = brillouin_zone(CUBIC)
    assert zone.exit_distance(np.array([1.0, 0, 0])) == pytest.approx(0.5)
    assert zone.exit_distance(np.ones(3) / np.sqrt(3)) == pytest.approx(np.sqrt(3) / 2)
