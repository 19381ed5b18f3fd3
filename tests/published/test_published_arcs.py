"""Fermi arcs of published Weyl semimetals: how many, where, how long, and lists that are wrong."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from node_models import double_weyl, weyl_two_band
from node_searches import LEFT_HANDED, ORTHOGONAL, bare_search
from topovet.boundary.arcs.loop import count_around
from topovet.boundary.arcs.projections import project_nodes, shortest_vector
from topovet.boundary.arcs.results import ArcSurvey
from topovet.boundary.arcs.survey import separating_surface, survey_arcs
from topovet.boundary.recut import Miller
from topovet.boundary.witness import CRITERIA, prepare_surface
from topovet.invariants.nodes.results import NodeSearch
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel

KZ = 0.2
SITES = np.zeros((2, 3))


@pytest.fixture(scope="module")
def weyl() -> NodeSearch:
    return bare_search(weyl_two_band(KZ), 1)


def _survey(nodes: NodeSearch, miller: Miller = (1, 0, 0), **model: float) -> ArcSurvey:
    return survey_arcs(
        weyl_two_band(KZ, **model),
        ORTHOGONAL,
        SITES,
        nodes,
        miller,
        CRITERIA["standard"],
        chosen_by="test",
    )


def _counted(
    model: TightBindingModel, crystal: Crystal, nodes: NodeSearch, miller: Miller
) -> tuple[int, int | None, tuple[int, int] | None]:
    """Sum of chiralities of the first projection, what levels say, arcs of both halves."""
    cut, _, stack = prepare_surface(model, crystal, SITES, miller, most_dropped_mev=0.0)
    first = project_nodes(nodes.points, cut)[0]
    count, _, _ = count_around(stack, cut, 1, 0, first, CRITERIA["standard"], shortest_vector(cut))
    return first.chirality, count.chirality, count.ends


def test_the_arc_of_two_weyl_points_in_closed_form(weyl: NodeSearch) -> None:
    """Yang, Lu, Ran, PRB 84, 075129 (2011), on the surface (1 0 0).

    Along a_1 the model is a chain sin a_1 sigma_x + (m - cos a_1) sigma_z with m = cos a_3
    - cos 2 pi kz + 2 - cos a_2, and sin a_2 sigma_y besides: a half-chain has a zero mode for
    |m| < 1, an eigenstate of sigma_y, so that E = ± sin a_2. At the nodes' energy, 0, the arc is
    a_2 = 0, |a_3| > 2 pi kz, a straight line of length 2 pi (1 - 2 kz) / c through the zone's edge.
    """
    found = _survey(weyl)
    assert (found.status, found.reason) == ("agree", "")
    assert sorted(c.chirality or 0 for c in found.loops) == [-1, 1]
    assert all(c.ends == (1, 1) for c in found.loops)
    assert {arc.side for arc in found.arcs} == {0, 1}
    for arc in found.arcs:
        assert {arc.start, arc.end} == {0, 1}
        assert np.abs(arc.path[:, 0]).max() < 1e-4
        along = np.abs((arc.path[:, 1] + 0.5) % 1.0 - 0.5)
        assert along.min() > KZ - 1e-6
        assert arc.length_ang == pytest.approx(2 * np.pi * (1 - 2 * KZ) / 5.0, rel=1e-5)


def test_a_wrong_list_of_chiralities_is_caught(weyl: NodeSearch) -> None:
    """Exchanged signs, as a wrong orientation would give them: they still add up to zero."""
    wrong = replace(weyl, points=tuple(replace(p, charge=-(p.charge or 0)) for p in weyl.points))
    found = _survey(wrong)
    assert found.status == "disagree"
    assert "add up to" in found.reason


def test_chirality_is_that_of_cartesian_k_also_on_the_surface() -> None:
    model = weyl_two_band(KZ)
    nodes = bare_search(model, 1, LEFT_HANDED)
    charge = nodes.points[0].charge
    assert _counted(model, LEFT_HANDED, nodes, (1, 0, 0)) == (charge, charge, (1, 1))


def test_two_arcs_end_at_a_double_weyl_point() -> None:
    """Fang, Gilbert, Dai, Bernevig, PRL 108, 266802 (2012)."""
    model = double_weyl(KZ)
    nodes = bare_search(model, 1)
    charge = nodes.points[0].charge
    assert abs(charge or 0) == 2
    assert _counted(model, ORTHOGONAL, nodes, (1, 0, 0)) == (charge, charge, (2, 2))


def test_where_chiralities_cancel_no_arc_is_asked_for(weyl: NodeSearch) -> None:
    """Both points fall on the centre of the surface (0 0 1)."""
    found = _survey(weyl, (0, 0, 1))
    assert [(p.chirality, len(p.nodes)) for p in found.projections] == [(0, 2)]
    assert (found.status, found.loops[0].chirality, found.arcs) == ("agree", 0, ())
    candidates = [(0, 0, 1), (0, 1, 0), (1, 0, 0)]
    assert separating_surface(weyl.points, ORTHOGONAL, candidates) == (0, 1, 0)
    assert separating_surface(weyl.points, ORTHOGONAL, candidates[:1]) is None


def test_nodes_at_different_energies_leave_no_length() -> None:
    """A tilt along the axis puts the nodes at ± 0.1 sin(2 pi kz) (both of type I)."""
    nodes = bare_search(weyl_two_band(KZ, tilt=0.1), 1)
    found = _survey(nodes, tilt=0.1)
    assert found.status == "agree"
    assert [c.ends for c in found.loops] == [(1, 1), (1, 1)]
    assert found.arcs == ()
    assert "differ in energy" in found.arcs_note
