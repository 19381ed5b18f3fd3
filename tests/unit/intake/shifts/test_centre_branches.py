"""Centres modulo the supercell, suspects, and putting them back."""

from __future__ import annotations

import numpy as np

from topovet.intake.shifts.centre_branches import (
    centre_offsets,
    centres_on_other_sites,
    site_spacings,
    suspicious_centres,
)

CELL = np.array([[4.0, 0, 0], [-2.0, 2 * np.sqrt(3.0), 0], [0, 0, 6.0]])
SITES = np.array([[0.0, 0, 0], [0.0, 0, 0], [1 / 3, 2 / 3, 0.5]])
MESH = (3, 3, 2)


def test_a_supercell_vector_is_no_offset_but_a_cell_vector_is() -> None:
    supercell, one_cell = np.array([3, -6, 2]) @ CELL, np.array([1, 0, 0]) @ CELL
    small = np.array([0.1, 0, 0])
    centres = SITES @ CELL + [supercell + small, one_cell, small]
    np.testing.assert_allclose(centre_offsets(centres, SITES, CELL, MESH), [0.1, 4.0, 0.1])


def test_the_nearest_image_is_taken_in_an_oblique_cell() -> None:
    oblique = np.array([[3.0, 0, 0], [14.0, 3.0, 0], [0, -7.0, 4.0]])
    rng = np.random.default_rng(0)
    images = rng.integers(-5, 6, (40, 3)) * (2, 2, 1)
    step = rng.normal(0, 0.3, (40, 3))
    centres = images @ oblique + step
    offsets = centre_offsets(centres, np.zeros((40, 3)), oblique, (2, 2, 1))
    np.testing.assert_allclose(offsets, np.linalg.norm(step, axis=1), atol=1e-12)


def test_spacing_is_the_nearest_other_site_or_lattice_vector() -> None:
    bond = np.hypot(4 / np.sqrt(3), 3.0)  # to (1/3, 2/3, 1/2)
    np.testing.assert_allclose(site_spacings(SITES, CELL), [bond] * 3)
    np.testing.assert_allclose(site_spacings(SITES[:2], CELL), [4.0, 4.0])
    assert site_spacings(np.empty((0, 3)), CELL).shape == (0,)


def test_beyond_half_way_is_suspicious_and_the_bond_centre_is_not() -> None:
    half = site_spacings(SITES, CELL)[0] / 2
    assert suspicious_centres([half, 1.2 * half, 0.0], SITES, CELL).tolist() == [
        False,
        True,
        False,
    ]


def test_centre_on_another_site_is_told_from_one_that_is_nowhere() -> None:
    mesh = (4, 4, 4)
    cart = SITES @ CELL
    nowhere = cart[1] + 0.37 * CELL[0] + 0.21 * CELL[1]
    centres = np.array([cart[1] + 4 * CELL[2] + 0.05, nowhere, cart[2]])
    suspects = np.array([True, True, False])
    found = centres_on_other_sites(centres, SITES, CELL, mesh, suspects)
    assert found.tolist() == [True, False, False]
