"""Weyl points of a real Hamiltonian against the levels of its surface."""

from __future__ import annotations

import numpy as np
import pytest

from node_searches import bare_search
from real_cases import run_of
from topovet.boundary.arcs.survey import survey_arcs
from topovet.boundary.witness import CRITERIA
from topovet.model.hamiltonian import build_model

pytestmark = [pytest.mark.real_data, pytest.mark.endurance]


def test_bitei_half_way_to_its_strong_phase_is_a_weyl_semimetal() -> None:
    """Murakami, New J. Phys. 9, 356 (2007): without inversion a Weyl phase lies between the trivial
    and the strong insulator; for BiTeI under pressure Liu, Vanderbilt, PRB 90, 155316 (2014) (both
    from memory). Off the mirrors of P3m1, time reversal included, an orbit has 12 points, and
    mirrors turn their charges over: 6 of each.
    """
    runs = [run_of(name) for name in ("BiTeI", "BiTeI_pressed")]
    ends = [run.result("hamiltonian-with-basis") for run in runs]
    share = (0.42, 0.58)
    model = build_model(
        np.concatenate([end.lattice.model.r_cells for end in ends]),
        np.concatenate([s * end.lattice.model.h_r for s, end in zip(share, ends, strict=True)]),
        spinful=True,
    )
    crystal = runs[0].result("declarations").crystal
    nodes = bare_search(model, 12, crystal)
    assert nodes.complete, nodes.reason
    assert sorted(p.charge or 0 for p in nodes.points) == [-1] * 6 + [1] * 6
    found = survey_arcs(
        model,
        crystal,
        ends[0].basis.positions_frac,
        nodes,
        (0, 0, 1),
        CRITERIA["standard"],
        chosen_by="test",
    )
    assert (found.status, found.reason) == ("agree", "")
    assert len(found.loops) == 6
    assert {c.chirality for c in found.loops} == {-1, 1}
