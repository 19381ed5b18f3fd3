"""Cells of one lattice told differently."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from topovet.model.cell_relation import atoms_in_cell, relate_cells

TRICLINIC = np.array([[4.1, 0.0, 0.2], [0.9, 5.3, 0.0], [-0.4, 1.1, 6.7]])
TURN = Rotation.from_rotvec([0.3, -0.8, 0.5]).as_matrix()
FCC = np.array([[0, 3.23, 3.23], [3.23, 0, 3.23], [3.23, 3.23, 0]])
CUBE = 6.46 * np.eye(3)


def test_same_cell_within_the_digits_of_a_file() -> None:
    found = relate_cells(TRICLINIC, TRICLINIC + 4e-4)
    assert found.kind == "identical"
    assert not found.turned
    assert found.misfit_ang is not None
    assert 0 < found.misfit_ang < 2e-3


def test_same_cell_in_another_orientation() -> None:
    found = relate_cells(TRICLINIC @ TURN, TRICLINIC)
    assert found.kind == "rotated"
    assert found.rotation is not None
    np.testing.assert_allclose(found.rotation, TURN, atol=1e-9)


@pytest.mark.parametrize("turn", [np.eye(3), TURN], ids=["as is", "turned"])
def test_other_vectors_of_the_same_lattice(turn: np.ndarray) -> None:
    matrix = np.array([[1, 2, 0], [0, 1, -1], [1, 2, 1]])
    assert round(np.linalg.det(matrix)) == 1
    found = relate_cells(matrix @ TRICLINIC @ turn, TRICLINIC)
    assert found.kind == "unimodular"
    assert found.matrix is not None
    assert found.rotation is not None
    np.testing.assert_array_equal(found.matrix, matrix)
    np.testing.assert_allclose(found.rotation, turn, atol=1e-9)


@pytest.mark.parametrize(
    "matrix",
    [np.diag([2, 1, 1]), np.diag([2, 2, 2]), np.array([[1, 1, 0], [-1, 1, 0], [0, 0, 3]])],
    ids=["2", "8", "6"],
)
def test_supercell_whichever_comes_first(matrix: np.ndarray) -> None:
    big, multiple = matrix @ TRICLINIC, abs(round(np.linalg.det(matrix)))
    found = relate_cells(big, TRICLINIC)
    assert (found.kind, found.larger, found.multiple) == ("supercell", "first", multiple)
    np.testing.assert_array_equal(found.matrix, matrix)
    found = relate_cells(TRICLINIC @ TURN, big)
    assert (found.kind, found.larger, found.multiple) == ("supercell", "second", multiple)
    assert found.matrix is not None
    assert found.rotation is not None
    np.testing.assert_allclose(found.matrix @ (TRICLINIC @ TURN) @ found.rotation, big, atol=1e-8)


def test_conventional_cube_of_the_fcc_lattice() -> None:
    """a1 + a2 - a3 and so on make the cube of four primitive cells."""
    found = relate_cells(CUBE, FCC)
    assert (found.kind, found.larger, found.multiple) == ("supercell", "first", 4)
    np.testing.assert_array_equal(found.matrix, [[-1, 1, 1], [1, -1, 1], [1, 1, -1]])
    assert not found.turned


def test_axes_in_another_order_need_no_rotation() -> None:
    found = relate_cells(TRICLINIC[[1, 2, 0]], TRICLINIC)
    assert found.kind == "unimodular"
    assert not found.turned
    np.testing.assert_array_equal(found.matrix, np.eye(3)[[1, 2, 0]])


def test_mirror_image_is_a_last_resort() -> None:
    mirrored = TRICLINIC @ np.diag([1.0, 1.0, -1.0])
    found = relate_cells(mirrored, TRICLINIC)
    # minus all vectors is a proper rotation of the mirror image in no triclinic lattice, but the
    # lattice has inversion: -1 times the mirror is a proper rotation
    assert found.rotation is not None
    assert np.linalg.det(found.rotation) == pytest.approx(1)
    assert found.kind == "unimodular"


@pytest.mark.parametrize(
    "other",
    [TRICLINIC * 1.02, 1.5 * TRICLINIC, np.diag([4.0, 5.0, 7.3]), 6 * TRICLINIC, np.zeros((3, 3))],
    ids=["strained", "half-integer", "another", "too large", "flat"],
)
def test_unrelated_cells(other: np.ndarray) -> None:
    found = relate_cells(other, TRICLINIC)
    assert found.kind == "unrelated"
    assert found.matrix is None


def test_tolerance_is_what_it_says() -> None:
    stretched = TRICLINIC.copy()
    stretched[0, 0] += 0.015
    assert relate_cells(stretched, TRICLINIC).kind == "unrelated"
    assert relate_cells(stretched, TRICLINIC, tolerance_ang=0.02).kind == "identical"


def test_atoms_of_a_conventional_cell_come_out_in_the_primitive_one() -> None:
    """Rock salt: eight atoms in the cube are two in the face-centred cell, turned or not."""
    cube = 6.0 * np.eye(3)
    primitive = 3.0 * np.array([[0, 1, 1], [1, 0, 1], [1, 1, 0]], dtype=float)
    turn = np.array([[0.0, 1, 0], [-1, 0, 0], [0, 0, 1]])
    corners = np.array([[0, 0, 0], [0, 0.5, 0.5], [0.5, 0, 0.5], [0.5, 0.5, 0]])
    positions = np.concatenate([corners, corners + np.array([0.5, 0, 0])]) % 1.0
    symbols = ("Pb",) * 4 + ("Te",) * 4
    for cell in (cube, cube @ turn):
        relation = relate_cells(cell, primitive)
        found = atoms_in_cell(symbols, positions, cell, primitive, relation)
        assert found is not None
        assert found[0] == ("Pb", "Te")
        apart = (found[1][1] - found[1][0] - 0.5 + 0.5) % 1.0 - 0.5
        np.testing.assert_allclose(apart, 0.0, atol=1e-9)


def test_atoms_that_break_the_smaller_lattice_are_not_mapped() -> None:
    cell, small = np.diag([8.0, 4.0, 4.0]), 4.0 * np.eye(3)
    relation = relate_cells(cell, small)
    assert relation.kind == "supercell"
    moved = np.array([[0.0, 0, 0], [0.55, 0, 0]])
    assert atoms_in_cell(("Sb", "Sb"), moved, cell, small, relation) is None
    assert (
        atoms_in_cell(("Sb", "Bi"), np.array([[0.0, 0, 0], [0.5, 0, 0]]), cell, small, relation)
        is None
    )


def test_a_smaller_or_unrelated_cell_has_no_atoms_to_give() -> None:
    small, large = 4.0 * np.eye(3), np.diag([8.0, 4.0, 4.0])
    at = np.zeros((1, 3))
    assert atoms_in_cell(("Sb",), at, small, large, relate_cells(small, large)) is None
    odd = 4.1 * np.eye(3)
    assert atoms_in_cell(("Sb",), at, odd, small, relate_cells(odd, small)) is None
