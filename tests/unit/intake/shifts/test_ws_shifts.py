"""Wigner-Seitz shifts against hand-made answers and a plain slow search."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest

import topovet.intake.shifts.ws_shifts as ws_shifts
from companion_files import hermitian_file, mesh_cells
from topovet.arrays import FloatArray, IntArray
from topovet.intake.records import WsShifts
from topovet.intake.shifts.ws_shifts import apply_shifts, rebuild_shifts

HEXAGONAL = np.array([[4.0, 0, 0], [-2.0, 2 * np.sqrt(3.0), 0], [0, 0, 15.0]])


def slow_shifts(
    r_cells: IntArray,
    centres_frac: FloatArray,
    mp_grid: tuple[int, int, int],
    cell: FloatArray,
    tol: float = 1e-5,
    search_size: tuple[int, int, int] = (2, 2, 2),
) -> list[list[list[int]]]:
    """Wannier90's two loops, one hopping at a time (Pizzi et al. 2020)."""
    box = [np.array(c) * mp_grid for c in product(*(range(-s - 1, s + 2) for s in search_size))]
    found = []
    for r in r_cells:
        for tau_m in centres_frac:
            for tau_n in centres_frac:
                lengths = [np.linalg.norm((tau_n + r + t - tau_m) @ cell) for t in box]
                best = box[int(np.argmin(lengths))]
                again = [np.linalg.norm((tau_n + r + best + t - tau_m) @ cell) for t in box]
                least = min(lengths)
                ties = [best + t for t, x in zip(box, again, strict=True) if abs(x - least) < tol]
                found.append(sorted(tie.tolist() for tie in ties))
    return found


def as_lists(shifts: WsShifts) -> list[list[list[int]]]:
    ends = np.cumsum(shifts.counts.reshape(-1))
    return [part.tolist() for part in np.split(shifts.shifts, ends[:-1])]


def test_one_function_on_a_chain_of_four_shares_the_zone_edge() -> None:
    chain = np.array([[-1, 0, 0], [0, 0, 0], [1, 0, 0], [2, 0, 0]])
    shifts = rebuild_shifts(chain, np.zeros((1, 3)), (4, 1, 1), np.diag([1.0, 9, 9]))
    assert as_lists(shifts) == [
        [[0, 0, 0]],
        [[0, 0, 0]],
        [[0, 0, 0]],
        [[-4, 0, 0], [0, 0, 0]],
    ]


def test_the_shift_depends_on_which_function_hops_to_which() -> None:
    """At R = 2 on a chain of four, tau = 0.3 is nearer from the left or from the right."""
    centres = np.array([[0.0, 0, 0], [0.3, 0, 0]])
    shifts = rebuild_shifts(np.array([[2, 0, 0]]), centres, (4, 1, 1), np.diag([1.0, 9, 9]))
    from_0_to_1, from_1_to_0 = as_lists(shifts)[1:3]
    assert from_0_to_1 == [[-4, 0, 0]]  # |0.3 + 2 - 4| = 1.7 < 2.3
    assert from_1_to_0 == [[0, 0, 0]]  # |-0.3 + 2| = 1.7


@pytest.mark.parametrize("seed", range(6))
def test_equals_the_slow_search_in_skewed_cells(seed: int) -> None:
    rng = np.random.default_rng(seed)
    cell = HEXAGONAL + rng.normal(0, 0.4, (3, 3)) * (seed % 3)
    mp_grid = tuple(int(n) for n in rng.integers(1, 4, 3))
    # Sixths put functions on edges and corners of the Wigner-Seitz cell: many ties.
    centres = rng.integers(-6, 7, (3, 3)) / 6
    r_cells = mesh_cells(mp_grid)[:6]
    fast = rebuild_shifts(r_cells, centres, mp_grid, cell)
    assert as_lists(fast) == slow_shifts(r_cells, centres, mp_grid, cell)


@pytest.mark.parametrize(
    "centre", [[9.0, 0, 0], [-7.5, 0.5, 0], [4.0, -8.5, 0.5]], ids=["far", "tie", "two axes"]
)
def test_centres_beyond_the_search_are_cut_off_as_by_wannier90(centre: list[float]) -> None:
    centres = np.array([[0.0, 0, 0], centre])
    r_cells, mp_grid = mesh_cells((2, 2, 1)), (2, 2, 1)
    for search_size in ((2, 2, 2), (0, 1, 0)):
        fast = rebuild_shifts(r_cells, centres, mp_grid, HEXAGONAL, search_size=search_size)
        slow = slow_shifts(r_cells, centres, mp_grid, HEXAGONAL, search_size=search_size)
        assert as_lists(fast) == slow


def test_a_very_oblique_cell_finds_what_the_search_of_wannier90_finds() -> None:
    cell = np.array([[3.0, 0, 0], [13.0, 3.0, 0], [5.0, -7.0, 4.0]])
    centres = np.array([[0.0, 0, 0], [0.5, 0.5, 0.5]])
    r_cells, mp_grid = mesh_cells((2, 2, 2)), (2, 2, 2)
    fast = rebuild_shifts(r_cells, centres, mp_grid, cell)
    assert as_lists(fast) == slow_shifts(r_cells, centres, mp_grid, cell)


def test_tolerance_decides_what_is_shared() -> None:
    chain, cell = np.array([[2, 0, 0]]), np.diag([1.0, 9, 9])
    centres = np.array([[0.0, 0, 0], [0.0004, 0, 0]])  # distances 2.0004 and 1.9996
    tight = rebuild_shifts(chain, centres, (4, 1, 1), cell, tol=7e-4)
    loose = rebuild_shifts(chain, centres, (4, 1, 1), cell, tol=9e-4)
    assert tight.counts[0].tolist() == [[2, 1], [1, 2]]
    assert loose.counts[0].tolist() == [[2, 2], [2, 2]]


def test_small_chunks_change_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    centres = np.array([[0.0, 0, 0], [1 / 3, 2 / 3, 0], [12.0, 0, 0]])
    arguments = (mesh_cells((3, 3, 1)), centres, (3, 3, 1), HEXAGONAL)
    whole = rebuild_shifts(*arguments)
    monkeypatch.setattr(ws_shifts, "CHUNK_ROWS", 5)
    assert as_lists(rebuild_shifts(*arguments)) == as_lists(whole)


def test_shifts_move_and_share_the_elements() -> None:
    chain = hermitian_file([[0, 0, 0], [1, 0, 0], [2, 0, 0], [-1, 0, 0]], 1)
    shifts = rebuild_shifts(chain.r_cells, np.zeros((1, 3)), (4, 1, 1), np.diag([1.0, 9, 9]))
    r_cells, h_r = apply_shifts(chain, shifts)
    assert r_cells[:, 0].tolist() == [-2, -1, 0, 1, 2]
    h = chain.h_r[:, 0, 0]
    np.testing.assert_array_equal(h_r[:, 0, 0], [h[2] / 2, h[3], h[0], h[1], h[2] / 2])


def test_equals_a_slow_sum_over_elements_and_shifts() -> None:
    rng = np.random.default_rng(3)
    file = hermitian_file(mesh_cells((3, 2, 2)).tolist(), 3)
    file.degeneracies[:] = rng.integers(1, 4, len(file.r_cells))
    shifts = rebuild_shifts(file.r_cells, rng.random((3, 3)), (3, 2, 2), HEXAGONAL)
    r_cells, h_r = apply_shifts(file, shifts)
    expected: dict[tuple[int, ...], complex] = {}
    for (r, m, n), part in zip(np.ndindex(*shifts.counts.shape), as_lists(shifts), strict=True):
        for t in part:
            key = (*(file.r_cells[r] + t).tolist(), m, n)
            weight = file.degeneracies[r] * len(part)
            expected[key] = expected.get(key, 0) + file.h_r[r, m, n] / weight
    dense = {(*r_cells[i].tolist(), m, n): h_r[i, m, n] for i, m, n in np.ndindex(*h_r.shape)}
    assert {key: value for key, value in dense.items() if value != 0} == pytest.approx(expected)


def test_without_shifts_only_the_degeneracies_are_applied() -> None:
    file = hermitian_file([[0, 0, 0], [1, 0, 0], [-1, 0, 0]], 2)
    file.degeneracies[:] = (1, 2, 4)
    r_cells, h_r = apply_shifts(file, None)
    np.testing.assert_array_equal(r_cells, file.r_cells)
    np.testing.assert_array_equal(h_r[1:], file.h_r[1:] / np.array([2, 4])[:, None, None])
    assert not np.shares_memory(h_r, file.h_r)


def test_repeated_r_are_summed() -> None:
    file = hermitian_file([[0, 0, 0], [1, 0, 0], [1, 0, 0]], 1)
    shifts = rebuild_shifts(file.r_cells, np.zeros((1, 3)), (4, 1, 1), np.diag([1.0, 9, 9]))
    r_cells, h_r = apply_shifts(file, shifts)
    assert r_cells.tolist() == [[0, 0, 0], [1, 0, 0]]
    assert h_r[1, 0, 0] == file.h_r[1, 0, 0] + file.h_r[2, 0, 0]


def test_shifts_of_another_hamiltonian_are_refused() -> None:
    file = hermitian_file([[0, 0, 0], [1, 0, 0]], 1)
    shifts = rebuild_shifts(file.r_cells[::-1], np.zeros((1, 3)), (4, 1, 1), np.eye(3))
    with pytest.raises(ValueError, match="another list of R"):
        apply_shifts(file, shifts)
    two = rebuild_shifts(file.r_cells, np.zeros((2, 3)), (4, 1, 1), np.eye(3))
    with pytest.raises(ValueError, match="another number of Wannier functions"):
        apply_shifts(file, two)
    short = WsShifts(file.r_cells, np.full((2, 1, 1), 2), np.zeros((3, 3), dtype=np.int64))
    with pytest.raises(ValueError, match="add up"):
        apply_shifts(file, short)
