"""Natural surfaces and the place of the cut."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from boundary_models import prepared
from chern_models import layered_bhz
from lattice_models import bhz, wilson_dirac
from topovet.boundary.cleavage import (
    layers_of,
    next_likeliest,
    place_cut,
    rank_surfaces,
    widest_cut,
)
from topovet.boundary.recut import recut
from topovet.model.crystal import Crystal


def _natural(model):
    sites = model.basis.positions_frac
    return rank_surfaces(model.tight_binding(), model.crystal, sites, model.filling)[0].miller


@pytest.mark.parametrize("c_ang", [3.0, 8.0])
def test_layers_are_cut_apart(c_ang: float) -> None:
    """Whether the planes are dense or not: what counts is how little couples them."""
    model = layered_bhz(t_z=0.05)
    cell = np.diag([6.46, 6.46, c_ang])
    crystal = Crystal(cell, model.crystal.symbols, model.crystal.positions_frac)
    assert _natural(replace(model, crystal=crystal)) == (0, 0, 1)


def test_a_cube_is_cut_along_its_densest_planes() -> None:
    assert _natural(wilson_dirac(m=-2.0)) in ((1, 0, 0), (0, 1, 0), (0, 0, 1))


def test_a_cut_that_leaves_unlike_faces_is_dearer() -> None:
    """Without an operation that turns the axis round its faces differ (a point group 4mm)."""
    model = wilson_dirac(m=-2.0)
    polar = np.array([np.eye(3), np.diag([-1, 1, 1]), np.diag([1, -1, 1]), np.diag([-1, -1, 1])])
    planes = rank_surfaces(
        model.tight_binding(), model.crystal, None, model.filling, polar.astype(np.int64)
    )
    found = {p.miller: p for p in planes}
    assert (found[(0, 0, 1)].polar, found[(1, 0, 0)].polar) == (True, False)
    assert found[(0, 0, 1)].cost > found[(1, 0, 0)].cost
    assert planes[0].miller == (1, 0, 0)
    assert next_likeliest(planes).cost > planes[0].cost


def test_an_edge_runs_along_a1() -> None:
    model = bhz(m=1.0)
    miller = _natural(model)
    assert miller == (0, 1, 0)
    assert abs(recut(model.crystal, miller).matrix[0, 0]) == 1


def test_widest_interval_may_hold_the_cell_boundary() -> None:
    assert widest_cut(np.array([0.3, 0.6, -0.5]), 1.0) == (pytest.approx(0.95), pytest.approx(0.7))
    assert widest_cut(np.array([0.1, 0.2]), 5.0)[0] == pytest.approx(0.65)
    assert widest_cut(np.empty(0), 5.0) == (0.0, 5.0)


def test_the_cut_names_what_it_lays_bare() -> None:
    cell = np.diag([4.0, 4.0, 10.0])
    sites = np.array([[0.0, 0.0, 0.1], [0.0, 0.5, 0.1], [0.0, 0.0, 0.5]])
    crystal = Crystal(cell, ("Te", "Te", "I"), sites)
    place = place_cut(crystal, recut(crystal, (0, 0, 1)))
    assert place.width_ang == pytest.approx(6.0)
    assert place.height == pytest.approx(0.8)
    upper, lower = place.terminations
    assert (upper.atoms, lower.atoms) == ("Te", "I")
    assert upper.name == "upper half, Te outermost"


def test_functions_are_counted_between_cuts() -> None:
    crystal = Crystal(np.eye(3), (), np.empty((0, 3)))
    sites = np.array([[0.0, 0.0, 0.1], [0.0, 0.0, 0.9], [0.0, 0.0, -0.3], [5.0, 0.0, 1.9]])
    assert layers_of(sites, recut(crystal, (0, 0, 1)), 0.5).tolist() == [-1, 0, -1, 1]


def test_the_cut_passes_between_atoms_not_through_a_bond() -> None:
    """Layers at z = -0.1 and 0.1 belong together although a cell boundary lies between them."""
    model = layered_bhz(t_z=0.05)
    _, place, stack = prepared(model, (0, 0, 1))
    assert place.height == pytest.approx(0.5)
    assert stack.reach == 1
