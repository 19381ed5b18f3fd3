"""Flux through closed surfaces against charges that are known, and against a determinant."""

from __future__ import annotations

import numpy as np
import pytest

from node_models import nodal_ring, two_bands, weyl_two_band
from proof_models import SIGMA
from topovet.invariants.nodes.flux import (
    loop_berry_phase,
    nearest_quantised,
    node_flux,
    surface_shape,
)
from topovet.model.fourier import build_bloch_sum
from topovet.spectrum.closings.local import describe_touching

CUBIC = 2 * np.pi * np.eye(3) / 4.0


@pytest.mark.parametrize("seed", range(4))
def test_charge_of_a_cone_is_the_sign_of_its_determinant(seed: int) -> None:
    """d = V sin(a) at k = 0, V random: charge sign det V, velocities its singular values."""
    v = np.random.default_rng(seed).normal(size=(3, 3))
    terms = {}
    for axis in range(3):
        cell = [0, 0, 0]
        cell[axis] = 1
        terms[(cell[0], cell[1], cell[2])] = np.tensordot(v[axis], SIGMA, axes=1) / 2j
    bloch = build_bloch_sum(two_bands(terms))
    touching = describe_touching(bloch, np.zeros(3), 1, CUBIC)
    assert touching.velocities[::-1] == pytest.approx(4 * np.linalg.svd(v)[1], rel=1e-9)
    flux = node_flux(bloch, np.zeros(3), 1, CUBIC, surface_shape(touching.metric), 0.1)
    assert flux.charge == np.sign(np.linalg.det(v))
    assert flux.largest_flux < 1.2


def test_surface_around_a_pair_or_around_nothing_has_no_charge() -> None:
    bloch = build_bloch_sum(weyl_two_band(0.05))
    round_ = np.eye(3)
    assert node_flux(bloch, np.zeros(3), 1, CUBIC, round_, 0.5).charge == 0
    assert node_flux(bloch, np.array([0.3, 0.1, 0.0]), 1, CUBIC, round_, 0.2).charge == 0


def test_loop_around_a_line_and_beside_it() -> None:
    bloch = build_bloch_sum(nodal_ring().tight_binding())
    on_ring = np.array([0.25, 0.0, 0.0])
    normal = np.array([0.0, 1.0, 0.0])
    phase, gap = loop_berry_phase(bloch, on_ring, normal, 0.05, 1, CUBIC)
    assert nearest_quantised(phase) == 1
    assert gap > 0.05
    beside, _ = loop_berry_phase(bloch, np.array([0.25, 0.0, 0.2]), normal, 0.05, 1, CUBIC)
    assert nearest_quantised(beside) == 0


def test_phases_that_are_not_quantised_are_not_called_so() -> None:
    assert nearest_quantised(None) is None
    assert nearest_quantised(0.5) is None
    assert nearest_quantised(-0.999) == 1
