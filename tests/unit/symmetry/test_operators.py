"""Operators of single operations: what is refused, phases of other cells, spin, time reversal."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from topovet.arrays import FloatArray
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.hybrids import harmonic_coefficients
from topovet.symmetry.operator_set import build_operators, symmetric_cell
from topovet.symmetry.operators import (
    NotClosedError,
    build_operator,
    cartesian_rotation,
    factor_system,
    operator_at,
    spin_rotation,
    time_reversal_matrix,
    with_time_reversal,
)

CUBE = Crystal(4 * np.eye(3), ("X",), np.zeros((1, 3)))
IDENTITY = np.eye(3, dtype=np.int64)
HALF_X, HALF_Y, HALF_Z = (np.diag(d) for d in ([1, -1, -1], [-1, 1, -1], [-1, -1, 1]))
QUARTER_Z = np.array([[0, -1, 0], [1, 0, 0], [0, 0, 1]])
ORIGIN = np.zeros(3)


def basis_of(
    functions: list[tuple[int, int]],
    position: tuple[float, ...] = (0, 0, 0),
    *,
    spinful: bool = False,
) -> OrbitalBasis:
    spins = 2 if spinful else 1
    rows = np.repeat(np.array([harmonic_coefficients(l, mr) for l, mr in functions]), spins, axis=0)
    return OrbitalBasis(
        np.tile(np.array(position, dtype=float), (len(rows), 1)),
        rows,
        np.tile(np.eye(2, dtype=complex)[:spins], (len(functions), 1)),
        tuple(f"X1 l{l} {mr} {spin}" for l, mr in functions for spin in range(spins)),
        np.ones(len(rows), dtype=np.int64),
    )


P_SHELL = [(1, 1), (1, 2), (1, 3)]  # z, x, y


def test_quarter_turn_takes_px_to_py_and_py_to_minus_px() -> None:
    operator = build_operator(basis_of(P_SHELL), CUBE, QUARTER_Z, ORIGIN)
    np.testing.assert_allclose(operator.matrix, [[1, 0, 0], [0, 0, -1], [0, 1, 0]], atol=1e-14)


def test_spin_of_a_quarter_turn_about_z() -> None:
    """exp(-i sigma_z pi/4) on spin up and down: textbook, with the sign of the smaller angle."""
    operator = build_operator(basis_of([(0, 1)], spinful=True), CUBE, QUARTER_Z, ORIGIN)
    phase = np.exp(-0.25j * np.pi)
    np.testing.assert_allclose(operator.matrix, np.diag([phase, phase.conj()]), atol=1e-14)


def test_inversion_leaves_spin_alone_and_a_mirror_is_its_half_turn() -> None:
    np.testing.assert_allclose(spin_rotation(-np.eye(3)), np.eye(2), atol=1e-15)
    np.testing.assert_allclose(spin_rotation(-1.0 * HALF_Z), spin_rotation(1.0 * HALF_Z))
    np.testing.assert_allclose(spin_rotation(1.0 * HALF_Z), np.diag([-1j, 1j]), atol=1e-15)


def test_double_group_of_the_half_turns() -> None:
    """C2^2 = -1 and C2x C2y = -C2y C2x on spin 1/2; both signs are + without spin."""
    for spinful, sign in ((True, -1), (False, 1)):
        basis = basis_of([(0, 1)], spinful=spinful)
        turns = [build_operator(basis, CUBE, w, ORIGIN) for w in (IDENTITY, HALF_X, HALF_Y, HALF_Z)]
        system = factor_system(turns)
        assert system.defect < 1e-14
        assert np.array_equal(np.diag(system.sign), [1, sign, sign, sign])
        assert system.sign[1, 2] == sign * system.sign[2, 1]
        assert system.product[1, 2] == 3


def test_bare_spinless_functions_do_not_feel_the_spin_part() -> None:
    operator = build_operator(basis_of([(0, 1)]), CUBE, HALF_X, ORIGIN)
    np.testing.assert_allclose(operator.matrix, [[1.0]], atol=1e-15)


def test_part_of_a_shell_is_refused_and_named() -> None:
    with pytest.raises(NotClosedError, match=r"X1 l1 2 0 is not mapped onto declared orbitals"):
        build_operator(basis_of([(0, 1), (1, 2)]), CUBE, QUARTER_Z, ORIGIN)
    whole = build_operator(basis_of([(0, 1), (1, 2)]), CUBE, HALF_Z, ORIGIN)
    np.testing.assert_allclose(whole.matrix, np.diag([1, -1]), atol=1e-14)


def test_a_long_list_of_functions_is_cut() -> None:
    lone = basis_of([(-3, 1), (-3, 2), (-3, 3)], spinful=True)
    with pytest.raises(NotClosedError, match=r"X1 l-3 2 1 and 2 more are not mapped"):
        build_operator(lone, CUBE, -IDENTITY, ORIGIN)


def test_site_without_image_is_named() -> None:
    with pytest.raises(NotClosedError, match=r"site of X1 l0 1 0 0\.400 angstrom away"):
        build_operator(basis_of([(0, 1)], (0.1, 0, 0)), CUBE, QUARTER_Z, np.array([0.1, -0.2, 0]))


def test_site_tolerance_is_a_choice() -> None:
    basis, near = basis_of([(0, 1)], (0.02, 0, 0)), np.array([0.02, 0, 0])
    with pytest.raises(NotClosedError):
        build_operator(basis, CUBE, QUARTER_Z, near)
    operator = build_operator(basis, CUBE, QUARTER_Z, near, site_tolerance_ang=0.2)
    np.testing.assert_allclose(operator.matrix, [[1.0]], atol=1e-14)


def test_shells_of_one_kind_do_not_mix() -> None:
    twice = replace(basis_of([*P_SHELL, *P_SHELL]), shells=np.repeat([1, 2], 3))
    operator = build_operator(twice, CUBE, QUARTER_Z, ORIGIN)
    assert not operator.matrix[:3, 3:].any()


def test_image_in_another_cell_gets_its_phase() -> None:
    """The function at 0.75 goes to 1.25 = 0.25 of cell +1 under x -> x + 1/2."""
    basis = replace(
        basis_of([(0, 1), (0, 1)]), positions_frac=np.array([[0.25, 0, 0], [0.75, 0, 0]])
    )
    operator = build_operator(basis, CUBE, IDENTITY, np.array([0.5, 0, 0]))
    assert operator.shifts.tolist() == [[0, 0, 0], [1, 0, 0]]
    k = np.array([[0.1, 0.2, 0.3]])
    np.testing.assert_allclose(
        operator_at(operator, k)[0], [[0, np.exp(-2j * np.pi * 0.1)], [1, 0]], atol=1e-14
    )


def test_functions_of_one_site_in_different_cells() -> None:
    """px listed one cell further along y: D(k) of all at home, with the phase of that cell."""
    home = basis_of(P_SHELL)
    away = replace(home, positions_frac=np.array([[0, 0, 0], [0, 1, 0], [0, 0, 0]]))
    k = np.array([[0.11, 0.23, 0.37]])
    plain = build_operator(home, CUBE, QUARTER_Z, ORIGIN)
    moved = build_operator(away, CUBE, QUARTER_Z, ORIGIN)
    # |n> of the second list is |n R> of the first with R = y: exp(-2 pi i k_y) at k
    at_k, at_image = (
        np.diag(np.exp(-2j * np.pi * (q[0] @ away.positions_frac.T)))
        for q in (k, k @ plain.k_rotation)
    )
    expected = at_image.conj() @ operator_at(plain, k)[0] @ at_k
    np.testing.assert_allclose(operator_at(moved, k)[0], expected, atol=1e-14)


def test_a_layer_has_one_cell_along_its_normal() -> None:
    layer = Crystal(np.diag([4.0, 4.0, 20.0]), ("X",), np.zeros((1, 3)), (True, True, False))
    basis = basis_of([(0, 1)], (0, 0, 0.9))
    operator = build_operator(basis, layer, -IDENTITY, np.array([0, 0, 0.8]))
    assert operator.shifts[0, 2] == 0
    cube = replace(CUBE, periodic=(True, True, False))
    turn_out = np.array([[1, 0, 0], [0, 0, -1], [0, 1, 0]])
    with pytest.raises(NotClosedError, match="periodic directions"):
        build_operator(basis_of([(0, 1)]), cube, turn_out, ORIGIN)


def test_time_reversal_turns_spins_over_in_any_frame() -> None:
    """Theta^2 = T T* = -1, and Theta commutes with rotations, for spins along z and elsewhere."""
    basis = basis_of(P_SHELL, spinful=True)
    tilted = replace(basis, spinors=basis.spinors @ spin_rotation(_turn(0.7)).T)
    for one in (basis, tilted):
        t = time_reversal_matrix(one)
        np.testing.assert_allclose(t @ t.conj(), -np.eye(6), atol=1e-14)
        turn = build_operator(one, CUBE, QUARTER_Z, ORIGIN).matrix
        np.testing.assert_allclose(turn @ t, t @ turn.conj(), atol=1e-14)
    assert np.array_equal(time_reversal_matrix(basis_of(P_SHELL)), np.eye(3))


def test_time_reversal_needs_both_spins() -> None:
    pair = basis_of([(0, 1)], spinful=True)
    three = replace(
        basis_of([(0, 1), (1, 1)], spinful=True).reordered(np.array([0, 1, 3])),
        labels=("s up", "s down", "pz down"),
    )
    with pytest.raises(NotClosedError, match="pz down is without spin partner"):
        time_reversal_matrix(three)
    assert time_reversal_matrix(pair).shape == (2, 2)


def test_products_with_time_reversal_multiply_as_they_should() -> None:
    """(C2 Theta)^2 = C2^2 Theta^2 = +1 with spin: no Kramers pairs from it alone."""
    basis = basis_of([(0, 1)], spinful=True)
    identity, turn = (build_operator(basis, CUBE, w, ORIGIN) for w in (IDENTITY, HALF_Z))
    theta, product = (with_time_reversal(o, basis) for o in (identity, turn))
    system = factor_system([identity, turn, theta, product])
    assert system.defect < 1e-14
    assert system.sign[2, 2] == -1
    assert system.sign[3, 3] == 1
    assert system.product[3].tolist() == [3, 2, 1, 0]


def test_open_sets_have_no_factor_system() -> None:
    basis = basis_of([(0, 1)])
    with pytest.raises(NotClosedError, match="not closed under multiplication"):
        factor_system([build_operator(basis, CUBE, QUARTER_Z, ORIGIN)])


def test_wrong_operators_show_up_as_defect() -> None:
    basis = basis_of(P_SHELL)
    identity, turn = (build_operator(basis, CUBE, w, ORIGIN) for w in (IDENTITY, HALF_Z))
    wrong = replace(turn, matrix=turn.matrix @ np.diag([1.0, 1.0, 1j]))
    assert factor_system([identity, turn]).defect < 1e-14
    assert factor_system([identity, wrong]).defect > 0.5


def test_cells_with_few_digits_still_give_groups() -> None:
    """A hexagonal cell to three digits: operators built singly close to 1e-8, a set to rounding."""
    cell = np.array([[4.138, 0, 0], [-2.069, 3.584, 0], [0, 0, 28.64]])
    crystal = Crystal(cell, ("X",), np.zeros((1, 3)))
    third = np.array([[0, -1, 0], [1, -1, 0], [0, 0, 1]])
    rotations = np.array([IDENTITY, third, third @ third])
    basis = basis_of(P_SHELL, spinful=True)
    singly = [build_operator(basis, crystal, w, ORIGIN) for w in rotations]
    together = build_operators(basis, crystal, rotations, np.zeros((3, 3))).operators
    assert 1e-10 < factor_system(singly).defect < 1e-6
    assert factor_system(together).defect < 1e-14


def test_symmetric_cell_is_near_and_exact() -> None:
    cell = np.array([[4.0, 0.01, 0], [0, 4.02, 0], [0.02, 0, 6.0]])
    rotations = np.array([np.linalg.matrix_power(QUARTER_Z, n) for n in range(4)])
    made = symmetric_cell(cell, rotations)
    for rotation in rotations:
        turn = cartesian_rotation(rotation, made)
        np.testing.assert_allclose(turn.T @ turn, np.eye(3), atol=1e-14)
    assert np.abs(made - cell).max() < 0.03
    np.testing.assert_allclose(symmetric_cell(CUBE.cell, rotations), CUBE.cell, atol=1e-13)


def test_sets_say_why_an_operation_is_missing() -> None:
    rotations = np.array([IDENTITY, QUARTER_Z, HALF_Z])
    found = build_operators(basis_of([(1, 2)]), CUBE, rotations, np.zeros((3, 3)))
    assert found.indices.tolist() == [0, 2]
    assert list(found.reasons) == [1]
    assert "X1 l1 2 0 is not mapped" in found.reasons[1]


def _turn(angle: float) -> FloatArray:
    cos, sin = np.cos(angle), np.sin(angle)
    return np.array([[cos, 0, sin], [0, 1, 0], [-sin, 0, cos]])
