"""What Wigner-Seitz shifts must never change, and what they must make right."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from companion_files import hermitian_file, mesh_cells
from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.intake.shifts.ws_shifts import apply_shifts, rebuild_shifts

grids = st.tuples(st.integers(1, 4), st.integers(1, 4), st.integers(1, 3))
coordinates = st.one_of(st.integers(-24, 24).map(lambda i: i / 12), st.floats(-15, 15))
cells = st.integers(0, 2**31).map(
    lambda seed: np.diag([3.0, 4.0, 5.0]) + np.random.default_rng(seed).normal(0, 0.7, (3, 3))
)


def bloch(r_cells: IntArray, h_r: ComplexArray, k_frac: FloatArray) -> ComplexArray:
    """H(k) by its definition."""
    phases = np.exp(2j * np.pi * (k_frac @ r_cells.T))
    return np.asarray(np.einsum("kr,rmn->kmn", phases, h_r))


@given(
    grids,
    st.lists(st.tuples(coordinates, coordinates, coordinates), min_size=1, max_size=3),
    cells,
    st.integers(0, 99),
)
@settings(max_examples=60, deadline=None)
def test_the_coarse_mesh_is_untouched(
    mp_grid: tuple[int, int, int], centres: list[tuple[float, ...]], cell: FloatArray, seed: int
) -> None:
    """Supercell vectors do not show at the k-points of the mesh, wherever the centres are."""
    file = hermitian_file(mesh_cells(mp_grid).tolist(), len(centres), seed=seed)
    shifts = rebuild_shifts(file.r_cells, np.array(centres), mp_grid, cell)
    mesh = mesh_cells(mp_grid) / np.array(mp_grid)
    np.testing.assert_allclose(
        bloch(*apply_shifts(file, shifts), mesh),
        bloch(*apply_shifts(file, None), mesh),
        atol=1e-11,
    )


@given(
    grids, st.lists(st.tuples(coordinates, coordinates, coordinates), min_size=1, max_size=3), cells
)
@settings(max_examples=40, deadline=None)
def test_shifts_of_opposite_hoppings_are_opposite(
    mp_grid: tuple[int, int, int], centres: list[tuple[float, ...]], cell: FloatArray
) -> None:
    """(R, m, n) and (-R, n, m) are one hopping seen from its two ends."""
    r_cells = np.unique(np.concatenate([mesh_cells(mp_grid), -mesh_cells(mp_grid)]), axis=0)
    # Search wide enough never to be cut off, which would depend on the end one looks from.
    shifts = rebuild_shifts(r_cells, np.array(centres), mp_grid, cell, search_size=(40, 40, 40))
    ends = np.cumsum(shifts.counts.reshape(-1))
    parts = np.array([*np.split(shifts.shifts, ends[:-1]), None], dtype=object)[:-1]
    square = parts.reshape(shifts.counts.shape)
    for r, m, n in np.ndindex(*shifts.counts.shape):
        opposite = square[len(r_cells) - 1 - r, n, m]
        np.testing.assert_array_equal(square[r, m, n], -opposite[::-1])
