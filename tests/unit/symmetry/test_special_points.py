from __future__ import annotations

import numpy as np

from space_group_samples import sample_group
from topovet.model.crystal import Crystal
from topovet.symmetry.little_group import OperationList, same_point
from topovet.symmetry.special_points import find_special_points
from topovet.symmetry.trim import trim_points


def test_every_trim_is_in_one_star() -> None:
    for number in (2, 14, 62, 139, 166, 194, 216, 225):
        sample = sample_group(number)
        points = find_special_points(sample.crystal, sample.operations(spinful=True))
        for k in trim_points((True, True, True)):
            holding = [p for p in points if any(same_point(k, arm) for arm in p.star)]
            assert len(holding) == 1, (number, k)
            assert holding[0].is_trim
        assert points[0].name == "Γ"


def test_face_centred_cubic_points() -> None:
    """Γ, L (4), X (3), W (6) and K = U (12): one representative each."""
    sample = sample_group(225)
    points = find_special_points(sample.crystal, sample.operations(spinful=True))
    assert {p.name: len(p.star) for p in points} == {"Γ": 1, "L": 4, "X": 3, "W": 6, "K/U": 12}


def test_a_crystal_below_its_lattice_keeps_its_points_apart() -> None:
    """A cubic cell with nothing but the identity: no point stands for another TRIM."""
    none = OperationList(
        4.0 * np.eye(3), np.eye(3, dtype=np.int64)[None], np.zeros((1, 3)), np.array([False]), True
    )
    crystal = Crystal(4.0 * np.eye(3), (), np.zeros((0, 3)))
    points = find_special_points(crystal, none)
    assert sum(p.is_trim for p in points) == 8
    assert all(len(p.star) == 1 for p in points)
    named = [p.name for p in points if p.is_trim and p.name[0] != "("]
    assert sorted(named) == ["M", "R", "X", "Γ"]
    assert "(½, 0, 0)" in {p.name for p in points}


def test_two_dimensions() -> None:
    sample = sample_group(164)
    cell = np.array(sample.cell)
    cell[2, 2] = 20.0
    crystal = Crystal(cell, (), np.zeros((0, 3)), (True, True, False))
    points = find_special_points(crystal, sample.operations(spinful=True))
    assert {p.name: len(p.star) for p in points} == {"Γ": 1, "K": 2, "M": 3}
    assert all(p.k_frac[2] == 0 for p in points)
