"""Operations and positions of a layer, whatever its cell."""

from __future__ import annotations

import numpy as np
import pytest

from layer_group_samples import layer_groups
from topovet.arrays import FloatArray
from topovet.model.crystal import Crystal
from topovet.symmetry.bandreps.indicator_group import compute_band_representations
from topovet.symmetry.bandreps.layers import Layer, find_layer, keeps_layer, leans, name_of_layer

CELL = np.array([[4.0, 0, 0], [0, 4.0, 0], [0, 0, 20.0]])
IN_PLANE = (True, True, False)
ONE, UPSIDE_DOWN = np.eye(3, dtype=np.int64), np.diag([1, 1, -1])


def _crystal(heights: list[float]) -> Crystal:
    positions = np.array([[0.0, 0.0, z] for z in heights])
    return Crystal(CELL, ("X",) * len(heights), positions, IN_PLANE)


@pytest.mark.parametrize(
    ("heights", "middle"),
    [([0.5], 0.5), ([0.06, 0.94], 0.0), ([0.2, 0.3, 0.34], 0.27), ([0.9, 1.2], 0.05)],
)
def test_the_middle_is_opposite_the_widest_gap(heights: list[float], middle: float) -> None:
    layer = find_layer(_crystal(heights))
    assert layer is not None
    apart = layer.middle - middle
    assert (layer.axis, round(apart - round(apart), 9)) == (2, 0.0)


def test_a_crystal_is_no_layer() -> None:
    assert find_layer(Crystal(CELL, ("X",), np.zeros((1, 3)))) is None


def test_half_a_vacuum_is_no_translation_of_a_layer() -> None:
    """Two equal sheets half a cell apart: the cell repeats itself, the pair of sheets does not."""
    layer = find_layer(_crystal([0.25, 0.75]))
    assert layer is not None
    rotations = np.array([ONE, ONE, UPSIDE_DOWN, UPSIDE_DOWN, np.diag([-1, 1, 1])])
    along = [0.0, 0.5, 2 * layer.middle, 2 * layer.middle + 0.5, 1.0]
    translations = np.array([[0.0, 0.0, z] for z in along])
    kept = keeps_layer(layer, rotations, translations, CELL)
    assert kept.tolist() == [True, False, True, False, True]


def test_a_vector_out_of_the_plane_that_leans() -> None:
    """c = c0 + a/2: reflection in the plane takes c to a - c."""
    layer = Layer(2, 0.0)
    reflection = np.array([[1, 0, 1], [0, 1, 0], [0, 0, -1]])
    out_of_plane = np.array([[0, 0, 1], [0, 1, 0], [-1, 0, 0]])
    rotations = np.array([ONE, reflection, out_of_plane])
    assert leans(layer, rotations).tolist() == [False, True, False]
    kept = keeps_layer(layer, rotations, np.zeros((3, 3)), CELL)
    assert kept.tolist() == [True, False, False]


@pytest.mark.parametrize(
    ("number", "orders"),
    [
        (1, [1]),  # p1: 1a
        (2, [2] * 4),  # p-1: 1a to 1d, half of those of P-1
        (49, [2, 4, 4]),  # p4: 1a 1b on axes, 2c
        (61, [8, 16, 16]),  # p4/mmm: 1a 1b, 2c mmm
        (69, [6] * 3),  # p3m1: 1a 1b 1c
        (72, [4, 6, 12]),  # p-3m1: 1a -3m, 2b 3m, 3c 2/m
        (80, [8, 12, 24]),  # p6/mmm: 1a, 2b -6m2, 3c mmm
    ],
)
def test_maximal_positions(number: int, orders: list[int]) -> None:
    """International Tables E, as remembered. All at the height of the middle."""
    sample = layer_groups()[number]
    found = sample.representations(spinful=True)
    assert sorted(len(o.stratum.stabiliser) for o in found.orbits) == orders
    heights = np.concatenate([o.sites_frac[:, sample.layer.axis] for o in found.orbits])
    apart = heights - sample.layer.middle
    assert np.abs(apart - np.round(apart)).max() < 1e-6


def test_momenta_are_those_of_the_plane() -> None:
    """Gamma, M and K of the hexagonal zone, by the orders of their groups with time reversal."""
    found = layer_groups()[80].representations(spinful=True)
    assert sorted(len(s.stabiliser) for s in found.strata) == [16, 24, 48]
    assert not any(s.point[found.layer.axis] for s in found.strata if found.layer is not None)


@pytest.mark.parametrize("number", [7, 36, 52, 66, 74])
def test_other_cell_other_origin_few_digits(number: int) -> None:
    """Skewed in the plane, moved in all directions, translations with four digits."""
    sample = layer_groups()[number]
    plain = sample.representations(spinful=True)
    axis, others = sample.layer.axis, np.delete(np.arange(3), sample.layer.axis)
    rows = np.eye(3, dtype=np.int64)
    rows[others[0], others[1]] = -2
    inverse = np.linalg.inv(rows)
    rotations = np.round(inverse.T @ sample.rotations @ rows.T).astype(np.int64)
    origin: FloatArray = np.array([0.1234, -0.377, 0.291])
    moved = sample.translations + (np.eye(3) - sample.rotations) @ origin
    translations = np.round(moved @ inverse, 4)
    layer = Layer(axis, round(sample.layer.middle + float(origin[axis]), 4))
    cell = rows @ sample.cell
    found = compute_band_representations(cell, rotations, translations, spinful=True, layer=layer)
    assert found.indicator_group == plain.indicator_group
    assert found.smith.rank == plain.smith.rank
    sizes = [sorted(row.n_bands for row in x.rows) for x in (found, plain)]
    assert sizes[0] == sizes[1]
    assert name_of_layer(layer, cell, rotations, translations) == (number, sample.symbol)
