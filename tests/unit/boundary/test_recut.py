"""Cells re-cut along Miller indices."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from boundary_models import prepared
from chern_models import random_model
from topovet.boundary.layers import build_layers
from topovet.boundary.recut import integer_inverse, recut, recut_model
from topovet.errors import UndefinedError
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum

index = st.integers(-9, 9)
entry = st.floats(-1.0, 1.0)
cells = st.lists(entry, min_size=9, max_size=9).map(
    lambda x: 4 * np.eye(3) + 2.0 * np.array(x).reshape(3, 3)
)


@settings(max_examples=150, deadline=None)
@given(st.tuples(index, index, index), cells)
def test_the_new_cell_spans_the_same_lattice(miller: tuple[int, int, int], cell) -> None:
    assume(any(miller))
    crystal = Crystal(cell, (), np.empty((0, 3)))
    cut = recut(crystal, miller)
    reduced = np.array(miller) // math.gcd(*miller)
    assert cut.miller == tuple(reduced)
    # integer arithmetic: equal, not close
    assert np.array_equal(cut.matrix @ reduced, [0, 0, 1])
    assert np.array_equal(cut.matrix @ integer_inverse(cut.matrix), np.eye(3, dtype=int))
    handed = np.linalg.det(cut.matrix.astype(float))
    assert handed == pytest.approx(1.0, abs=1e-9)
    assert np.linalg.det(cut.cell) == pytest.approx(np.linalg.det(cell), rel=1e-9)
    assert cut.cell[:2] @ cut.normal_cart == pytest.approx([0, 0], abs=1e-9)
    assert cut.cell[2] @ cut.normal_cart == pytest.approx(cut.spacing_ang)
    # reduced: no shorter lattice vector in the plane than a'_1 and a'_2 themselves
    a, b = cut.cell[0], cut.cell[1]
    assert abs(a @ b) <= 0.5 * min(a @ a, b @ b) * (1 + 1e-6)


@pytest.mark.parametrize(
    "periodic", [(True, True, False), (True, False, True), (False, True, True)]
)
@pytest.mark.parametrize("indices", [(1, 0), (0, 1), (-2, 3), (4, 6)])
def test_edges_keep_the_vacuum_apart(periodic, indices) -> None:
    vacuum = periodic.index(False)
    miller = np.insert(np.array(indices), vacuum, 0)
    cut = recut(Crystal(np.diag([3.0, 4.0, 5.0]), (), np.empty((0, 3)), periodic), tuple(miller))
    assert cut.axes == (0,)
    assert cut.matrix[1].tolist() == [int(i == vacuum) for i in range(3)]
    assert cut.matrix[0][vacuum] == cut.matrix[2][vacuum] == 0
    assert np.linalg.det(cut.matrix.astype(float)) == pytest.approx(1.0)


@pytest.mark.parametrize(
    ("miller", "periodic", "word"),
    [
        ((0, 0, 0), (True, True, True), "must not all be 0"),
        ((0, 1, 1), (True, True, False), "direction 3 is not periodic"),
    ],
)
def test_indices_that_name_no_surface_are_refused(miller, periodic, word) -> None:
    crystal = Crystal(np.eye(3), (), np.empty((0, 3)), periodic)
    with pytest.raises(UndefinedError, match=word):
        recut(crystal, miller)


@pytest.mark.parametrize("miller", [(0, 0, 1), (1, 1, 1), (2, -1, 0), (-1, 2, 2)])
def test_bulk_energies_do_not_notice(miller) -> None:
    model = random_model(3, inversion=False)
    cut = recut(model.crystal, miller)
    rng = np.random.default_rng(0)
    layer_of = rng.integers(-2, 3, model.n_orb)
    stack = build_layers(
        recut_model(model.tight_binding(), cut, layer_of), sites_par=rng.normal(size=(8, 2))
    )
    k = rng.normal(size=(5, 3))
    k_new = k @ cut.matrix.T
    planes = stack.planes_at(k_new[:, :2])
    for i in range(len(k)):
        found = np.linalg.eigvalsh(stack.bulk_at(planes[:, i : i + 1], k_new[i, 2:])[0, 0])
        expected = np.linalg.eigvalsh(model.hamiltonian_at(k[i]))
        assert found == pytest.approx(expected, abs=1e-10)


def test_what_is_dropped_bounds_the_change_of_every_level() -> None:
    model = random_model(5, inversion=False)
    _, _, whole = prepared(model, (2, 1, 0))
    limit_mev = 4e4
    _, _, cut_short = prepared(model, (2, 1, 0), most_dropped_mev=limit_mev)
    assert cut_short.reach < whole.reach
    assert 0 < cut_short.dropped_mev <= limit_mev
    k = np.array([[0.1, 0.3]])
    grid = np.arange(16) / 16
    levels = [np.linalg.eigvalsh(s.bulk_at(s.planes_at(k), grid)) for s in (whole, cut_short)]
    moved = 1e3 * np.abs(levels[0] - levels[1]).max()
    assert 0 < moved <= cut_short.dropped_mev


def test_levels_of_the_stack_equal_those_of_the_fourier_sum() -> None:
    model = random_model(1, inversion=True)
    bloch = build_bloch_sum(model.tight_binding())
    _, _, stack = prepared(model, (0, 0, 1))
    k = np.array([[0.2, 0.4, 0.7]])
    plane_k = k @ recut(model.crystal, (0, 0, 1)).matrix.T
    found = np.linalg.eigvalsh(stack.bulk_at(stack.planes_at(plane_k[:, :2]), plane_k[0, 2:]))
    assert found[0, 0] == pytest.approx(np.linalg.eigvalsh(bloch.at(k))[0], abs=1e-10)
