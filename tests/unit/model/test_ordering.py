"""Block spin order undone in the files, before anything else sees them."""

from __future__ import annotations

import numpy as np

from topovet.intake.records import HamiltonianFile, WsShifts
from topovet.intake.shifts.ws_shifts import apply_shifts, rebuild_shifts
from topovet.model.ordering import interlacing_order, reorder_hamiltonian, reorder_shifts

CELL = np.diag([3.0, 4.0, 5.0])
CENTRES = np.array([[0, 0, 0], [0.4, 0.5, 0.1], [0, 0, 0.5], [0.5, 0.5, 0.5]])


def _file(n: int) -> HamiltonianFile:
    rng = np.random.default_rng(0)
    r_cells = np.array([[i, j, k] for i in (-1, 0, 1) for j in (-1, 0, 1) for k in (-1, 0, 1)])
    h = rng.normal(size=(27, n, n)) + 1j * rng.normal(size=(27, n, n))
    return HamiltonianFile(
        "x", "", np.ones(27, dtype=np.int64), r_cells, h, 6, "tolerant", centres_cart=CENTRES @ CELL
    )


def test_order_takes_up_and_down_in_turn() -> None:
    assert interlacing_order(6).tolist() == [0, 3, 1, 4, 2, 5]


def test_shifts_of_the_reordered_file_are_the_reordered_shifts() -> None:
    hamiltonian, order = _file(4), interlacing_order(4)
    shifts = rebuild_shifts(hamiltonian.r_cells, CENTRES, (3, 3, 3), CELL)
    assert shifts.counts.max() > 1
    reordered = reorder_hamiltonian(hamiltonian, order)
    directly = rebuild_shifts(hamiltonian.r_cells, CENTRES[order], (3, 3, 3), CELL)
    moved = reorder_shifts(shifts, order)
    np.testing.assert_array_equal(moved.counts, directly.counts)
    np.testing.assert_array_equal(moved.shifts, directly.shifts)
    r_1, h_1 = apply_shifts(hamiltonian, shifts)
    r_2, h_2 = apply_shifts(reordered, moved)
    np.testing.assert_array_equal(r_1, r_2)
    np.testing.assert_array_equal(h_1[:, order[:, None], order], h_2)
    assert reordered.centres_cart is not None
    np.testing.assert_array_equal(reordered.centres_cart, (CENTRES @ CELL)[order])


def test_reordering_back_is_the_identity() -> None:
    shifts = WsShifts(
        np.zeros((1, 3), dtype=np.int64),
        np.array([[[1, 2], [2, 1]]]),
        np.arange(18).reshape(6, 3),
    )
    order = np.array([1, 0])
    back = reorder_shifts(reorder_shifts(shifts, order), order)
    np.testing.assert_array_equal(back.counts, shifts.counts)
    np.testing.assert_array_equal(back.shifts, shifts.shifts)
