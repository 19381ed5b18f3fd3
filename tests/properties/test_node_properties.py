"""Nodes do not depend on cell, origin or orbital order, and their charges add up to zero."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lattice_models import LatticeModel
from model_changes import with_cell, with_order, with_origin
from node_models import on_axis_dirac, weyl_two_band
from node_searches import ORTHOGONAL, bare_search, symmetric_search
from topovet.invariants.nodes.results import NodeSearch
from topovet.model.hamiltonian import TightBindingModel, build_model


def _perturbed(model: TightBindingModel, seed: int, size: float) -> TightBindingModel:
    """Random hoppings to the nearest cells added: whatever symmetry there was is gone."""
    rng = np.random.default_rng(seed)
    noise = size * rng.normal(size=(*model.h_r.shape, 2)) @ np.array([1, 1j])
    return build_model(model.r_cells, model.h_r + noise, spinful=False)


@settings(max_examples=3, deadline=None)
@given(seed=st.integers(0, 10_000), size=st.sampled_from([0.02, 0.08]))
def test_charges_add_up_to_zero_whatever_is_added(seed: int, size: float) -> None:
    found = bare_search(_perturbed(weyl_two_band(0.15), seed, size), 1, ORTHOGONAL)
    assert found.charge_sum == 0
    assert found.complete, found.reason
    charges = sorted(p.charge or 0 for p in found.points)
    assert charges[:1] == [-1]
    assert charges[-1:] == [1]
    for point in found.points:
        assert point.gap_ev < 1e-6


def _facts(found: NodeSearch) -> list[tuple[object, ...]]:
    """What a choice of cell or origin must not change."""
    return sorted(
        (
            p.kind,
            p.charge,
            p.multiplicity,
            round(p.energy_ev, 6),
            tuple(round(v, 4) for v in p.velocities),
        )
        for p in found.points
    )


SHEAR = np.array([[1, 1, 0], [0, 1, 0], [0, -1, 1]])


@pytest.mark.parametrize(
    "change",
    [
        lambda m: with_cell(m, SHEAR),
        lambda m: with_origin(m, np.array([0.13, 0.4, 0.27])),
        lambda m: with_order(m, np.array([2, 3, 0, 1, 4, 5])),
    ],
    ids=["cell", "origin", "order"],
)
def test_nodes_belong_to_the_crystal(change) -> None:
    model: LatticeModel = on_axis_dirac()
    assert _facts(symmetric_search(change(model))) == _facts(symmetric_search(model))


def test_symmetry_only_saves_work() -> None:
    model = on_axis_dirac()
    with_it, without = symmetric_search(model), bare_search(model.tight_binding(), 2, model.crystal)
    assert len(with_it.points) == len(without.points) == 2
    assert with_it.n_solves < without.n_solves
    assert {p.kind for p in without.points} == {"accidental"}  # nothing is claimed without it
    assert replace(with_it.points[0], k=(0.0, 0.0, 0.0)).charge == 0
