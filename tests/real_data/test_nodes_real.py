"""Nodes between two valence bands of a real compound, held against symmetry that was not used."""

from __future__ import annotations

import numpy as np
import pytest

from real_cases import CASES
from topovet.invariants.nodes.results import NodeSearch
from topovet.pipeline.dossier import start_run

pytestmark = [pytest.mark.real_data, pytest.mark.endurance]


def test_weyl_points_of_bitei_between_its_valence_bands() -> None:
    """P3m1 with time reversal: two orbits of 12; mirrors turn charges over, rotations do not.

    The Wannier functions break the threefold axis by up to 12 meV, so that the search used one
    mirror and time reversal only. With 0.35 eV angstrom, the slowest velocity of these nodes, that
    moves one by at most 0.034 per angstrom, 0.02 in fractional k; half of that is asked for here.
    """
    run = start_run(CASES / "BiTeI", settings={"filling": 10})
    found: NodeSearch = run.result("nodes")
    assert found.complete, found.reason
    assert found.charge_sum == 0
    assert len(found.images) == 4
    assert len(found.points) == 24
    k = np.array([p.k for p in found.points])
    charge = np.array([p.charge for p in found.points])
    assert set(np.abs(charge)) == {1}
    rotations = run.result("space-group").rotations
    assert len(rotations) == 6
    images = [(np.linalg.inv(w), round(np.linalg.det(w))) for w in rotations]
    for turn, sign in [*images, (-np.eye(3), 1)]:  # time reversal keeps the charge
        away = (k @ turn)[:, None] - k
        apart = np.abs(away - np.round(away)).max(axis=2)
        assert apart.min(axis=1).max() < 0.01
        assert np.array_equal(charge[apart.argmin(axis=1)], sign * charge)
