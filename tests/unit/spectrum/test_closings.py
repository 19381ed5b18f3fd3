"""Closings are found or left open, never proved away."""

from __future__ import annotations

import numpy as np
import pytest

from node_models import weyl_two_band
from node_searches import ORTHOGONAL, bare_search
from proof_models import proven
from topovet.spectrum.closings.distinct import folded, unfolded
from topovet.spectrum.closings.search import search_closings


def test_a_pair_a_thousandth_apart_is_not_proved_away() -> None:
    """Between the two the gap is 0.01 meV; each has its charge, and little around it."""
    half = 5e-4
    found = bare_search(weyl_two_band(half), 1)
    pair = [p for p in found.points if p.charge]
    assert sorted(round(p.k[2], 7) for p in pair) == [-half, half]
    assert sum(p.charge or 0 for p in pair) == 0
    assert max(p.surface_gap_ev for p in pair) < 1e-3  # too little for a verdict to rest on


def test_the_budget_that_ends_is_said() -> None:
    model = weyl_two_band(0.2)
    found = search_closings(proven(model, crystal=ORTHOGONAL), 1, np.zeros((1, 3)), max_solves=50)
    assert found.exhausted
    assert found.n_solves >= 50


def test_open_boxes_hold_every_point_below_the_bound() -> None:
    """Plain random points: wherever the gap is below the bound, a box was left open."""
    model = weyl_two_band(0.2)
    hamiltonian = proven(model, crystal=ORTHOGONAL)
    found = search_closings(hamiltonian, 1, np.zeros((1, 3)), max_solves=20_000)
    rng = np.random.default_rng(1)
    k = np.array([0, 0, 0.2]) + 1e-4 * rng.normal(size=(500, 3))
    energies = np.linalg.eigvalsh(hamiltonian.bloch.at(k))
    below = k[energies[:, 1] - energies[:, 0] < found.elsewhere_ev]
    assert len(below) > 10
    boxes = np.concatenate([c.k_frac for c in found.clusters])
    reach = np.concatenate([c.reach_frac for c in found.clusters])
    away = below[:, None] - boxes
    away -= np.round(away)
    assert (np.linalg.norm(away, axis=2) <= reach).any(axis=1).all()


def test_images_are_folded_and_counted_once() -> None:
    images = np.array([np.eye(3), -np.eye(3)], dtype=np.int64)
    assert len(unfolded(np.array([0.5, 0.0, 0.5]), images)) == 1
    assert len(unfolded(np.array([0.1, 0.0, 0.5]), images)) == 2
    assert folded(np.array([-0.5, 0.75, 1.0])) == pytest.approx([0.5, -0.25, 0.0])
