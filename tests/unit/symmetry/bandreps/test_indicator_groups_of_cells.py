"""The indicator group belongs to the space group: setting, cell and origin must not matter."""

from __future__ import annotations

import warnings

import numpy as np
import pytest
import spglib

from space_group_samples import conventional_cell, sample_group
from topovet.arrays import FloatArray, IntArray
from topovet.symmetry.bandreps.indicator_group import (
    BandRepresentations,
    compute_band_representations,
)

SKEW = np.array([[1, 1, 0], [0, 1, -2], [0, 0, 1]])
"""New lattice vectors as rows in the old ones, of determinant 1."""


def _summary(found: BandRepresentations) -> tuple[tuple[int, ...], int, tuple[int, ...]]:
    """Indicator group, rank, and sizes of the band representations."""
    return (
        found.indicator_group,
        found.smith.rank,
        tuple(sorted(row.n_bands for row in found.rows)),
    )


def _in_cell(
    rows: IntArray, cell: FloatArray, rotations: IntArray, translations: FloatArray
) -> tuple[FloatArray, IntArray, FloatArray]:
    """A group in a cell whose vectors are integer rows of the old ones."""
    inverse = np.linalg.inv(rows.astype(float))
    turned = np.round(inverse.T @ rotations @ rows.T).astype(np.int64)
    return rows @ cell, turned, translations @ inverse


@pytest.mark.parametrize("number", [14, 82, 122, 147, 167, 199, 227])
def test_skewed_cell_other_origin_few_digits(number: int) -> None:
    group = sample_group(number)
    plain = compute_band_representations(
        group.cell, group.rotations, group.translations, spinful=True
    )
    origin = np.array([0.1234, -0.377, 0.291])
    moved = group.translations + (np.eye(3) - group.rotations) @ origin
    cell, rotations, translations = _in_cell(SKEW, group.cell, group.rotations, moved)
    rounded = np.round(translations, 4)
    skewed = compute_band_representations(cell, rotations, rounded, spinful=True)
    assert _summary(skewed) == _summary(plain)


@pytest.mark.parametrize("number", [5, 15, 82, 122, 148])
def test_conventional_cell_with_centring_translations(number: int) -> None:
    """A cell of several lattice points folds the zone; rank and group stay."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        hall = next(h for h in range(1, 531) if spglib.get_spacegroup_type(h).number == number)
        database = spglib.get_symmetry_from_database(hall)
    group = sample_group(number)
    assert len(database["rotations"]) > len(group.rotations)
    for spinful in (True, False):
        folded = compute_band_representations(
            conventional_cell(number),
            database["rotations"],
            database["translations"],
            spinful=spinful,
        )
        plain = compute_band_representations(
            group.cell, group.rotations, group.translations, spinful=spinful
        )
        assert folded.indicator_group == plain.indicator_group
        assert folded.smith.rank == plain.smith.rank


@pytest.mark.parametrize("number", [3, 13, 48, 86, 146, 148, 201])
def test_all_hall_settings_of_a_group(number: int) -> None:
    """Axes, cell choices, origins and obverse or rhombohedral axes, as the database has them."""
    groups = set()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        settings = [h for h in range(1, 531) if spglib.get_spacegroup_type(h).number == number]
        databases = [spglib.get_symmetry_from_database(h) for h in settings]
    for database in databases:
        cell = _metric_for(database["rotations"])
        found = compute_band_representations(
            cell, database["rotations"], database["translations"], spinful=True
        )
        groups.add((found.indicator_group, found.smith.rank))
    assert len(settings) > 1
    assert len(groups) == 1


def _metric_for(rotations: IntArray) -> FloatArray:
    """A cell that the rotations keep, from the mean metric."""
    metric = np.mean([w.T @ np.diag([21.0, 25.0, 34.0]) @ w for w in rotations], axis=0)
    return np.asarray(np.linalg.cholesky(metric))
