"""Nearest lattice images in skewed cells, against a search over many images."""

from __future__ import annotations

import itertools

import numpy as np

from topovet.model.nearest_image import nearest_images, reduce_cell

RHOMBOHEDRAL = np.array([[2.069, -1.1945, 9.5467], [0, 2.3891, 9.5467], [-2.069, -1.1945, 9.5467]])
"""Long and thin, like a layered crystal's primitive cell."""


def test_nearest_image_is_the_nearest_of_many() -> None:
    vectors = np.random.default_rng(3).uniform(-2, 2, size=(40, 3))
    many = np.array(list(itertools.product(range(-6, 7), repeat=3)))
    everywhere = np.linalg.norm((vectors[:, None, :] - many) @ RHOMBOHEDRAL, axis=2)
    lattice, distance = nearest_images(vectors, RHOMBOHEDRAL)
    np.testing.assert_allclose(distance, everywhere.min(axis=1), atol=1e-9)
    np.testing.assert_array_equal(lattice, many[everywhere.argmin(axis=1)])


def test_rounding_fractions_would_be_wrong_here() -> None:
    """The case the module exists for: half of a1 - a2 is nearer to 0 than rounding finds."""
    vector = np.array([0.55, -0.55, 0.0])
    rounded = np.linalg.norm((vector - np.round(vector)) @ RHOMBOHEDRAL)
    shortest = nearest_images(vector, RHOMBOHEDRAL)[1]
    assert shortest <= rounded
    vector = np.array([0.4, 0.4, -0.7])
    rounded = np.linalg.norm((vector - np.round(vector)) @ RHOMBOHEDRAL)
    assert nearest_images(vector, RHOMBOHEDRAL)[1] < rounded - 1.0


def test_shape_of_many_vectors_is_kept() -> None:
    lattice, distance = nearest_images(np.zeros((2, 5, 3)), np.eye(3))
    assert lattice.shape == (2, 5, 3)
    assert distance.shape == (2, 5)
    assert not lattice.any()


def test_reduced_cell_is_the_same_lattice() -> None:
    reduced, matrix = reduce_cell(RHOMBOHEDRAL)
    np.testing.assert_allclose(matrix @ RHOMBOHEDRAL, reduced, atol=1e-12)
    assert abs(round(np.linalg.det(matrix))) == 1
