"""Fermi arcs of a Weyl semimetal on one surface: what the nodes predict, what its levels say."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.boundary.arcs.loop import SAME_ENERGY_EV, ArcEnd, count_around
from topovet.boundary.arcs.projections import distances, project_nodes, shortest_vector
from topovet.boundary.arcs.results import Arc, ArcSurvey, LoopCount, Projection
from topovet.boundary.arcs.trace import Zone, trace_arc
from topovet.boundary.cleavage import Cut
from topovet.boundary.layers import LayerStack
from topovet.boundary.line import LineCriteria
from topovet.boundary.recut import Miller, Recut, recut
from topovet.boundary.witness import DROPPED_SHARE, prepare_surface
from topovet.errors import UndefinedError
from topovet.invariants.nodes.results import NodeSearch, PointNode
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel

MOST_LOOPS = {"standard": 6, "thorough": 24}
"""Projections around which levels are counted."""

MOST_ARCS = {"standard": 4, "thorough": 16}
"""Arcs that are followed, on each half-crystal."""

FULL_SIZE = 64
"""Orbitals of a principal layer up to which all of these are affordable: work grows as their cube,
and loops and arcs become as many times fewer, down to two and one."""

MOST_DROPPED_MEV = 1.0
"""Couplings between far planes are left out up to this, and up to `DROPPED_SHARE` of the gap around
the nodes."""


def separating_surface(
    points: Sequence[PointNode], crystal: Crystal, candidates: Sequence[Miller]
) -> Miller | None:
    """The first of some surfaces on which some sum of chiralities is not zero; None without one."""
    for miller in candidates:
        if any(p.chirality for p in project_nodes(points, recut(crystal, miller))):
            return miller
    return None


def survey_arcs(
    model: TightBindingModel,
    crystal: Crystal,
    positions_frac: FloatArray | None,
    nodes: NodeSearch,
    miller: Miller,
    criteria: LineCriteria,
    *,
    chosen_by: str,
    effort: str = "standard",
) -> ArcSurvey:
    """Project the nodes, count levels around their projections, follow the arcs.

    Parameters
    ----------
    model, crystal, positions_frac
        The Hamiltonian, its cell and its sites.
    nodes
        A complete list of points, each with its charge, and no lines.
    miller, chosen_by
        The surface, and where it comes from.
    criteria
        When a count is believed.
    effort
        How many loops and arcs.

    Raises
    ------
    UndefinedError
        The list is not complete, or there are lines; or the indices name no surface.
    """
    if not nodes.complete or nodes.lines or any(p.charge is None for p in nodes.points):
        raise UndefinedError("Fermi arcs need a complete list of points with their chiralities.")
    barrier_mev = 1e3 * min(p.surface_gap_ev for p in nodes.points)
    cut, place, stack = prepare_surface(
        model,
        crystal,
        positions_frac,
        miller,
        most_dropped_mev=min(MOST_DROPPED_MEV, DROPPED_SHARE * barrier_mev),
    )
    projections = project_nodes(nodes.points, cut)
    if stack.layer_size > criteria.most_layer:
        why = (
            f"a principal layer holds {stack.layer_size} orbitals, more than the "
            f"{criteria.most_layer} of this effort"
        )
        return _result(cut, place, chosen_by, projections, (), 0, why)
    most_loops, most_arcs = _affordable(stack, effort)
    counted = [
        count_around(stack, cut, nodes.filling, i, projections[i], criteria, shortest_vector(cut))
        for i in _order(nodes.points, projections)[:most_loops]
    ]
    loops = tuple(count for count, _, _ in counted)
    n_solves = sum(solved for _, _, solved in counted)
    said = _result(cut, place, chosen_by, projections, loops, n_solves, "")
    if said.status != "agree":
        return said
    ends = [(count.projection, end) for count, found, _ in counted for end in found]
    arcs, note = _arcs(stack, cut, nodes.filling, projections, loops, ends, most_arcs)
    return replace(said, arcs=arcs, arcs_note=note)


def _affordable(stack: LayerStack, effort: str) -> tuple[int, int]:
    """How many loops, and how many arcs of each half-crystal."""
    share = min(1.0, (FULL_SIZE / stack.layer_size) ** 3)
    return max(2, int(MOST_LOOPS[effort] * share)), max(1, int(MOST_ARCS[effort] * share))


def _order(points: Sequence[PointNode], projections: Sequence[Projection]) -> list[int]:
    """Those with chirality first, and of those that symmetry relates one before the others."""
    seen: dict[tuple[tuple[int, ...], int], int] = {}
    turn = []
    for p in projections:
        kind = (tuple(sorted({points[i].orbit for i in p.nodes})), abs(p.chirality))
        seen[kind] = seen.get(kind, 0) + 1
        turn.append(seen[kind])
    return sorted(range(len(projections)), key=lambda i: (projections[i].chirality == 0, turn[i]))


def _arcs(
    stack: LayerStack,
    cut: Recut,
    filling: int,
    projections: tuple[Projection, ...],
    loops: Sequence[LoopCount],
    ends: Sequence[tuple[int, ArcEnd]],
    most: int,
) -> tuple[tuple[Arc, ...], str]:
    """Arcs from the ends that were found, each followed once, and why some were not."""
    radius = {c.projection: c.radius_ang for c in loops}
    radii = [
        radius.get(i, min([*radius.values(), 0.4 * p.nearest_ang]))
        for i, p in enumerate(projections)
    ]
    zone = Zone(stack, cut, filling, projections, radii)
    arcs: list[Arc] = []
    left = [(start, end) for start, end in ends if _has_partner(projections, start)]
    note = ""
    if len(left) < len(ends):
        note = "nodes with chirality differ in energy: no arc joins them at one energy"
    while left:
        start, end = left.pop(0)
        if sum(a.side == end.side for a in arcs) >= most:
            note = note or f"no more than {most} arcs of a half-crystal are followed"
            continue
        arcs.append(trace_arc(zone, start, end))
        left = _without_its_other_end(cut, arcs[-1], left, radii)
    return tuple(arcs), note


def _has_partner(projections: Sequence[Projection], start: int) -> bool:
    """Whether another projection with chirality lies at the same energy."""
    here = projections[start].energy_ev
    return any(
        i != start and p.chirality and abs(p.energy_ev - here) < SAME_ENERGY_EV
        for i, p in enumerate(projections)
    )


def _without_its_other_end(
    cut: Recut, arc: Arc, left: list[tuple[int, ArcEnd]], radii: Sequence[float]
) -> list[tuple[int, ArcEnd]]:
    """The ends that remain to be followed: not the one that the arc came in by."""
    rivals = [i for i, (p, e) in enumerate(left) if p == arc.end and e.side == arc.side]
    if arc.end is None or not rivals:
        return left
    places = np.array([left[i][1].k_par for i in rivals])
    away = distances(cut, np.asarray(arc.path), places).min(axis=0)
    nearest = int(away.argmin())
    if away[nearest] > radii[arc.end]:
        return left
    return [e for i, e in enumerate(left) if i != rivals[nearest]]


def _result(
    cut: Recut,
    place: Cut,
    chosen_by: str,
    projections: tuple[Projection, ...],
    loops: tuple[LoopCount, ...],
    n_solves: int,
    reason: str,
) -> ArcSurvey:
    counted = [c for c in loops if c.status == "ok"]
    wrong = [c for c in counted if c.chirality != projections[c.projection].chirality]
    status = "disagree" if wrong else "agree" if counted else "unresolved"
    if wrong:
        at = projections[wrong[0].projection]
        where = ", ".join(f"{c:.4f}" for c in at.k_par)
        reason = (
            f"around k = ({where}) of the surface zone levels count {wrong[0].chirality}, but the "
            f"nodes projected there add up to {at.chirality}"
        )
    elif not counted and not reason:
        reason = next((c.reason for c in loops), "no node has a chirality")
    x, y, z = cut.normal_cart.tolist()
    upper, lower = place.terminations
    return ArcSurvey(
        status=status,
        reason=reason,
        miller=cut.miller,
        normal_cart=(x, y, z),
        chosen_by=chosen_by,
        terminations=(upper.name, lower.name),
        projections=projections,
        loops=loops,
        arcs=(),
        arcs_note="",
        n_solves=n_solves,
    )
