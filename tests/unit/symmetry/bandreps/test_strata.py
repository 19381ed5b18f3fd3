"""Special positions against what the International Tables and textbooks list, as remembered."""

from __future__ import annotations

import numpy as np
import pytest

from space_group_samples import sample_group
from topovet.symmetry.bandreps.double_group import build_double_group
from topovet.symmetry.bandreps.strata import Stratum, cell_torus, find_strata, zone_torus


def _maximal_positions(number: int) -> list[Stratum]:
    group = sample_group(number)
    table = build_double_group(group.cell, group.rotations, group.translations, spinful=True)
    strata = find_strata(cell_torus(table.rotations, table.numerators))
    return [s for s in strata if s.maximal]


@pytest.mark.parametrize(
    ("number", "orders"),
    [
        (1, [1]),  # P1: 1a
        (2, [2] * 8),  # P-1: 1a to 1h
        (19, [1]),  # P2_1 2_1 2_1: no special position
        (33, [1]),  # Pna2_1: none either
        (61, [2, 2]),  # Pbca: 4a, 4b
        (166, [4, 4, 12, 12]),  # R-3m: 3a 3b -3m, 9d 9e 2/m
        (216, [24] * 4),  # F-43m: 4a to 4d
        (221, [16, 16, 48, 48]),  # Pm-3m: 1a 1b m-3m, 3c 3d 4/mmm
        (225, [8, 24, 48, 48]),  # Fm-3m: 4a 4b m-3m, 8c -43m, 24d mmm
        (227, [12, 12, 24, 24]),  # Fd-3m: 8a 8b -43m, 16c 16d -3m
    ],
)
def test_maximal_wyckoff_positions(number: int, orders: list[int]) -> None:
    assert sorted(len(s.stabiliser) for s in _maximal_positions(number)) == orders


def _maximal_k(number: int) -> list[Stratum]:
    group = sample_group(number)
    table = build_double_group(group.cell, group.rotations, group.translations, spinful=True)
    return [s for s in find_strata(zone_torus(table.k_actions)) if s.maximal]


def test_maximal_k_of_face_centred_cubic() -> None:
    """Gamma, X, L and W of Fm-3m, by the orders of their groups with time reversal."""
    found = _maximal_k(225)
    assert [s.dimension for s in found] == [0] * 4
    assert sorted(len(s.stabiliser) for s in found) == [16, 24, 32, 96]


def test_a_whole_line_can_be_maximal() -> None:
    """K-H of P-3 beside Gamma, A, M and L: no operation singles out a point on it."""
    found = _maximal_k(147)
    assert sorted(s.dimension for s in found) == [0, 0, 0, 0, 1]
    line = next(s for s in found if s.dimension)
    assert np.array_equal(line.directions[:, 0], [0, 0, 1])
    assert np.allclose(3 * line.point_frac[:2] % 1, 0)
