"""Names, products and groups of operations."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from crystal_models import RECIPES, crystal_model
from topovet.symmetry.operations import (
    largest_closed_subset,
    multiplication_table,
    name_operation,
    same_operation,
)

CUBE = 4 * np.eye(3)
HEXAGON = np.array([[4, 0, 0], [-2, 2 * np.sqrt(3), 0], [0, 0, 6]])
QUARTER = np.array([[0, -1, 0], [1, 0, 0], [0, 0, 1]])
SIXTH = np.array([[1, -1, 0], [1, 0, 0], [0, 0, 1]])
AROUND_111 = np.array([[0, 0, 1], [1, 0, 0], [0, 1, 0]])  # x to y to z
NOWHERE = np.zeros(3)


@pytest.mark.parametrize(
    ("rotation", "translation", "name"),
    [
        (np.eye(3), NOWHERE, "1"),
        (np.eye(3), [0.5, 0.5, 0], "1 + (1/2, 1/2, 0)"),
        (-np.eye(3), NOWHERE, "-1"),
        (QUARTER, NOWHERE, "4+ [0 0 1]"),
        (QUARTER.T, [0, 0, -0.25], "4- [0 0 1] + (0, 0, 3/4)"),
        (-QUARTER, NOWHERE, "-4+ [0 0 1]"),
        (QUARTER @ QUARTER, NOWHERE, "2 [0 0 1]"),
        (np.diag([1, 1, -1]), [0.5, 0, 0], "m [0 0 1] + (1/2, 0, 0)"),
        (np.array([[0, 1, 0], [1, 0, 0], [0, 0, 1]]), NOWHERE, "m [-1 1 0]"),
        (AROUND_111, NOWHERE, "3+ [1 1 1]"),
        (AROUND_111.T, [1.0000001, 0, 0.12345], "3- [1 1 1] + (0, 0, 0.1235)"),
        (-AROUND_111, NOWHERE, "-3+ [1 1 1]"),
    ],
)
def test_names_in_a_cubic_cell(rotation: np.ndarray, translation: list[float], name: str) -> None:
    assert name_operation(rotation, np.array(translation), CUBE) == name


def test_names_in_a_hexagonal_cell_and_with_time_reversal() -> None:
    assert name_operation(SIXTH, np.array([0, 0, 5 / 6]), HEXAGON) == "6+ [0 0 1] + (0, 0, 5/6)"
    assert name_operation(np.linalg.matrix_power(SIXTH, 4), NOWHERE, HEXAGON) == "3- [0 0 1]"
    assert name_operation(np.eye(3), NOWHERE, HEXAGON, antiunitary=True) == "Θ"
    assert name_operation(SIXTH, NOWHERE, HEXAGON, antiunitary=True) == "6+ [0 0 1] Θ"


def test_sense_follows_the_handedness_of_the_cell() -> None:
    """Columns of W in a left-handed frame: the same numbers turn the other way."""
    left_handed = np.diag([4.0, 4.0, -4.0])
    assert name_operation(QUARTER, NOWHERE, left_handed) == "4- [0 0 1]"


def test_table_of_a_nonsymmorphic_group_is_a_group() -> None:
    crystal = crystal_model(RECIPES[10], spinful=False)  # rutile
    n = len(crystal.rotations)
    table, cells = multiplication_table(
        crystal.rotations, crystal.translations, np.zeros(n, dtype=bool)
    )
    assert all(sorted(row) == list(range(n)) for row in table.tolist())
    a, b = 5, 9
    made = crystal.rotations[a] @ crystal.translations[b] + crystal.translations[a]
    np.testing.assert_allclose(made - crystal.translations[table[a, b]], cells[a, b], atol=1e-6)


def test_table_says_where_a_product_is_missing() -> None:
    rotations = np.array([np.eye(3, dtype=np.int64), QUARTER])
    table, _ = multiplication_table(rotations, np.zeros((2, 3)), np.zeros(2, dtype=bool))
    assert table.tolist() == [[0, 1], [1, -1]]


def test_same_operation_modulo_the_lattice() -> None:
    rotations = np.array([QUARTER, QUARTER])
    translations = np.array([[0.5, 0, 0.99], [0, 0, 0]])
    found = same_operation(QUARTER, np.array([-0.5, 1, 0]), rotations, translations)
    assert found.tolist() == [True, False]


def test_what_is_closed_is_kept_whole() -> None:
    table = _cube_group()
    everything = np.ones(len(table), dtype=bool)
    assert len(largest_closed_subset(table, everything, np.zeros(len(table)))) == 24


@pytest.mark.parametrize("seed", range(6))
def test_largest_group_against_trying_all_generators(seed: int) -> None:
    """Every subgroup of the 24 rotations of a cube has at most two generators: try all pairs."""
    table = _cube_group()
    rng = np.random.default_rng(seed)
    among = rng.random(24) < 0.6
    among[0] = True
    found = largest_closed_subset(table, among, rng.random(24))
    assert among[found].all()
    assert np.isin(table[np.ix_(found, found)], found).all()
    best = max(
        (len(group) for a, b in itertools.product(np.flatnonzero(among), repeat=2)
         if among[group := _generated_by(table, [0, int(a), int(b)])].all()),
    )  # fmt: skip
    assert len(found) == best


def test_the_better_of_two_equal_groups_wins() -> None:
    """Of two half turns about x and y without the third, the one that holds better."""
    table, _ = multiplication_table(
        np.array([np.eye(3), *(np.diag(d) for d in ([1, -1, -1], [-1, 1, -1], [-1, -1, 1]))]),
        np.zeros((4, 3)),
        np.zeros(4, dtype=bool),
    )
    among = np.array([True, True, True, False])
    assert largest_closed_subset(table, among, np.array([0, 0.5, 0.1, 9])).tolist() == [0, 2]
    assert largest_closed_subset(table, among, np.array([0, 0.1, 0.5, 9])).tolist() == [0, 1]


def _cube_group() -> np.ndarray:
    """Products of the 24 proper rotations of a cube, the identity first."""
    signed = [
        np.array(signs)[:, None] * np.eye(3, dtype=np.int64)[list(order)]
        for order in itertools.permutations(range(3))
        for signs in itertools.product((1, -1), repeat=3)
    ]
    proper = np.array([m for m in signed if np.linalg.det(m) > 0])
    assert np.array_equal(proper[0], np.eye(3))
    return multiplication_table(proper, np.zeros((24, 3)), np.zeros(24, dtype=bool))[0]


def _generated_by(table: np.ndarray, members: list[int]) -> np.ndarray:
    group = np.unique(members)
    while len(larger := np.unique(table[np.ix_(group, group)])) > len(group):
        group = larger
    return group
