"""The gateway to spglib: what comes back is for the input cell, and verified."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from topovet.model.crystal import Crystal
from topovet.symmetry.spacegroup import (
    SymmetrySearchError,
    find_space_group,
    inversion_centres,
    nearest_centre_distance,
)

# International numbers from the International Tables for Crystallography, volume A.
ROCK_SALT = Crystal(
    3.2 * np.array([[0.0, 1, 1], [1, 0, 1], [1, 1, 0]]),
    ("A", "B"),
    np.array([[0, 0, 0], [0.5] * 3]),
)
ZINC_BLENDE = Crystal(ROCK_SALT.cell, ("A", "B"), np.array([[0, 0, 0], [0.25] * 3]))


def test_textbook_structures() -> None:
    rock_salt, zinc_blende = find_space_group(ROCK_SALT), find_space_group(ZINC_BLENDE)
    assert (rock_salt.number, rock_salt.symbol) == (225, "Fm-3m")
    assert (zinc_blende.number, zinc_blende.symbol) == (216, "F-43m")
    assert len(rock_salt.rotations) == 48
    assert len(rock_salt.centres_frac) == 8
    assert rock_salt.centres_frac[0].tolist() == [0, 0, 0]
    assert len(zinc_blende.centres_frac) == 0


def test_diamond_has_its_centres_between_the_atoms() -> None:
    diamond = Crystal(ROCK_SALT.cell, ("A", "A"), ZINC_BLENDE.positions_frac)
    group = find_space_group(diamond)
    assert group.number == 227
    np.testing.assert_allclose(sorted(group.centres_frac.sum(axis=1))[0], 3 / 8)


@given(
    skew=st.tuples(*[st.integers(-2, 2)] * 3),
    origin=st.tuples(*[st.floats(-1, 1)] * 3),
    crystal=st.sampled_from([ROCK_SALT, ZINC_BLENDE]),
)
@settings(max_examples=30, deadline=None)
def test_operations_fit_the_cell_that_was_given(
    skew: tuple[int, int, int], origin: tuple[float, float, float], crystal: Crystal
) -> None:
    change = np.array([[1, skew[0], skew[1]], [0, 1, skew[2]], [0, 0, 1]])
    positions = crystal.positions_frac @ np.linalg.inv(change) + np.array(origin)
    moved = Crystal(change @ crystal.cell, crystal.symbols, positions)
    group, reference = find_space_group(moved), find_space_group(crystal)
    assert group.number == reference.number
    assert len(group.centres_frac) == len(reference.centres_frac)
    for centre in group.centres_frac:  # the structure maps onto itself about every centre
        images = 2 * centre - positions
        for image, symbol in zip(images, moved.symbols, strict=True):
            same = np.array([s == symbol for s in moved.symbols])
            away = image - positions[same]
            assert np.abs((away - np.round(away)) @ moved.cell).max(axis=1).min() < 0.05


def test_failures_are_our_own_sentences() -> None:
    with pytest.raises(SymmetrySearchError, match="has no atoms"):
        find_space_group(Crystal(np.eye(3), (), np.empty((0, 3))))
    twice = Crystal(4 * np.eye(3), ("A", "A"), np.zeros((2, 3)))
    with pytest.raises(SymmetrySearchError, match="two atoms coincide"):
        find_space_group(twice)


def test_centres_of_one_operation_are_half_a_translation_apart() -> None:
    centres = inversion_centres(-np.eye(3, dtype=int)[None], np.array([[0.2, 0.0, 0.5]]))
    assert len(centres) == 8
    assert {tuple(c) for c in (2 * centres % 1).round(9)} == {(0.2, 0.0, 0.5)}
    assert centres[0].tolist() == [0.1, 0.0, 0.25]


def test_distance_to_a_centre_counts_images() -> None:
    centres = inversion_centres(-np.eye(3, dtype=int)[None], np.zeros((1, 3)))
    cell = 4 * np.eye(3)
    assert nearest_centre_distance(np.array([0.99, 0.5, 0.0]), centres, cell) == pytest.approx(0.04)
