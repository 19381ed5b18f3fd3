"""All closings at a filling: found, told apart, characterised, and what is left unexplained.

The list is called complete only if every box that no bound settles belongs to a point or a line of
it, each charge is settled, and the charges of the zone add up to zero: the flux that comes out of
the nodes has nowhere to go in a periodic zone (Nielsen, Ninomiya, Nucl. Phys. B 185, 20 (1981),
doi:10.1016/0550-3213(81)90361-8).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.invariants.nodes.lines import describe_line
from topovet.invariants.nodes.points import Case, as_vector, describe_points
from topovet.invariants.nodes.results import NodalLine, NodeSearch, Pocket, PointNode
from topovet.notation import k_text
from topovet.spectrum.closings.distinct import (
    NEIGHBOURHOOD,
    between,
    distances_to,
    first_of_each,
    folded,
    snapped,
    unfolded,
)
from topovet.spectrum.closings.local import describe_touching
from topovet.spectrum.closings.search import (
    ClosingSearch,
    Cluster,
    follow_down,
    search_closings,
)
from topovet.spectrum.closings.trace import STEP, TracedLine, is_on_line, is_on_surface, trace_line
from topovet.spectrum.proof.prove import ProvenHamiltonian

MOST_ORBITS = 24
"""Points and lines, one of each orbit, that are looked at; more are no list of nodes."""

MOST_LINES, MOST_TRACED = 12, 2500
"""Lines, one of each orbit, and their points: at 30 orbitals a point costs some 20 ms."""

NEAR_LINE = 3.0
"""A box belongs to a line that passes within so many times its own size."""


def survey_closings(
    hamiltonian: ProvenHamiltonian, case: Case, known_k: FloatArray, *, max_solves: int
) -> NodeSearch:
    """Every closing of the gap, or why the list may not be complete.

    Parameters
    ----------
    hamiltonian
        With the symmetries that may be used to reduce the zone.
    case
        The same Hamiltonian with its operators.
    known_k
        (n, 3) fractional: where small gaps are known.
    max_solves
        Budget of the exhaustive search; the characterisation comes on top.
    """
    found = search_closings(hamiltonian, case.filling, known_k, max_solves=max_solves)
    if found.degenerate:
        return _result(case, found, (), (), (), "the two bands are degenerate throughout the zone")
    if found.exhausted:
        n = sum(len(c.k_frac) for c in found.clusters)
        reason = f"the budget ended with {n} boxes left to be looked at"
        return _result(case, found, (), (), (), reason)
    touching = snapped(case.bloch, found.touching_k, case.filling)
    traced = _lines(case, touching, found.images)
    lines, on_lines = traced.lines, _all_images(traced.lines, found.images)
    reciprocal = case.crystal.reciprocal
    seeds = traced.rest[
        first_of_each(case.bloch, traced.rest, case.filling, reciprocal, found.images)
    ]
    reason = traced.reason
    if not reason and len(seeds) + len(lines) > MOST_ORBITS:
        reason = f"closings in more than {MOST_ORBITS} places that symmetry does not relate"
    if reason:
        return _result(case, found, (), (), (), reason)
    orbits = _orbits(hamiltonian, case, seeds, found.images)
    points = describe_points(case, orbits, on_lines)
    described = tuple(describe_line(case, line, found.images) for line in lines)
    pockets = _pockets(found.clusters, orbits, on_lines, found.images)
    reason = _incomplete(points, described, pockets, case.crystal.dimension)
    return _result(case, found, points, described, pockets, reason)


def _orbits(
    hamiltonian: ProvenHamiltonian, case: Case, seeds: FloatArray, images: IntArray
) -> list[FloatArray]:
    """(n, 3) nodes of each orbit in the whole zone, each brought to rest where it really is.

    A symmetry that H breaks a little takes a node beside a node; and a seed may turn out to be an
    image of another.
    """
    unit = float(np.linalg.norm(case.crystal.reciprocal, axis=1).min())
    identity = np.eye(3, dtype=np.int64)[None]
    taken, orbits = np.zeros((0, 3)), []
    for seed in seeds:
        there = unfolded(seed, images)
        rest, _, _ = follow_down(hamiltonian, case.filling, there)
        moved = np.linalg.norm(between(there, rest) @ case.crystal.reciprocal, axis=1)
        near = (moved < NEIGHBOURHOOD * unit)[:, None]
        nodes = snapped(case.bloch, folded(np.where(near, rest, there)), case.filling)
        all_k = np.concatenate([taken, nodes])
        kept = first_of_each(
            case.bloch, all_k, case.filling, case.crystal.reciprocal, identity, in_order=True
        )
        new = all_k[kept[kept >= len(taken)]]
        if len(new):
            orbits.append(folded(new))
            taken = np.concatenate([taken, folded(new)])
    return orbits


@dataclass(frozen=True, slots=True, eq=False)
class _Traced:
    """Lines, the points (n, 3) that are on none, and why tracing was given up, if it was."""

    lines: list[TracedLine]
    rest: FloatArray
    reason: str


def _lines(case: Case, touching_k: FloatArray, images: IntArray) -> _Traced:
    reciprocal = case.crystal.reciprocal
    lines: list[TracedLine] = []
    rest: list[FloatArray] = []
    left = np.unique(np.round(folded(touching_k), 9), axis=0).reshape(-1, 3)
    if case.crystal.dimension < 3:
        return _Traced(lines, left, "")
    while len(left):
        k, left = left[0], left[1:]
        touching = describe_touching(case.bloch, k, case.filling, reciprocal)
        if not is_on_line(case.bloch, touching, case.filling, reciprocal):
            rest.append(k)
            continue
        if is_on_surface(case.bloch, touching, case.filling, reciprocal):
            return _Traced([], left, f"the gap closes on a surface through k = {k_text(k)}")
        if len(lines) == MOST_LINES or sum(len(x.k_frac) for x in lines) > MOST_TRACED:
            return _Traced([], left, f"{len(lines)} nodal lines were followed, and more are there")
        lines.append(trace_line(case.bloch, touching, case.filling, reciprocal))
        away = distances_to(_all_images(lines[-1:], images), left) if len(left) else np.zeros(0)
        left = left[away > STEP]
    # a crossing of lines is no node of its own
    off, known = np.array(rest).reshape(-1, 3), _all_images(lines, images)
    if len(known) and len(off):
        off = off[distances_to(known, off) > STEP / 2]
    return _Traced(lines, off, "")


def _all_images(lines: list[TracedLine], images: IntArray) -> FloatArray:
    """(n, 3) points of all lines and of all their images, folded."""
    if not lines:
        return np.zeros((0, 3))
    points = np.concatenate([line.k_frac for line in lines])
    return folded(np.asarray(points @ images, dtype=float).reshape(-1, 3))


def _pockets(
    clusters: tuple[Cluster, ...],
    orbits: list[FloatArray],
    on_lines: FloatArray,
    images: IntArray,
) -> tuple[Pocket, ...]:
    """Clusters that neither hold a point nor lie on lines, nor touch one that holds a point."""
    points = np.concatenate([*orbits, np.zeros((0, 3))])
    holding = [c for c in clusters if _near(points, c, 1.5, 1e-6, np.any)]
    rest = [c for c in clusters if c not in holding]
    rest = [c for c in rest if not _near(on_lines, c, NEAR_LINE, STEP, np.all)]
    while joining := [c for c in rest if _touches(c, holding, images)]:
        # the irreducible part of the zone cuts a cluster on its border in two
        holding += joining
        rest = [c for c in rest if c not in joining]
    return tuple(Pocket(as_vector(folded(c.lowest_k)), c.lowest_ev) for c in rest)


def _near(
    points: FloatArray,
    cluster: Cluster,
    sizes: float,
    beyond: float,
    quantifier: Callable[[BoolArray], np.bool_],
) -> bool:
    """Whether any (all) boxes have one of the points within so many times their size."""
    if not len(points):
        return False
    away = distances_to(points, cluster.k_frac)
    return bool(quantifier(away <= sizes * cluster.reach_frac + beyond))


def _touches(cluster: Cluster, others: list[Cluster], images: IntArray) -> bool:
    """Whether a box may have a point in common with an image of a box of the others."""
    for other in others:
        centres = folded((other.k_frac @ images).reshape(-1, 3))
        away = distances_to(centres, cluster.k_frac)
        if np.any(away <= cluster.reach_frac + other.reach_frac.max()):
            return True
    return False


def _incomplete(
    points: tuple[PointNode, ...],
    lines: tuple[NodalLine, ...],
    pockets: tuple[Pocket, ...],
    dimension: int,
) -> str:
    """Why the list may lack something, one clause."""
    if pockets:
        least = min(p.gap_ev for p in pockets)
        return (
            f"in {len(pockets)} place{'s' if len(pockets) > 1 else ''} no bound could be proved "
            f"and no closing was found (smallest gap there {1000 * least:.3g} meV)"
        )
    if any(not line.closed for line in lines):
        return "a nodal line could not be followed to its end"
    if dimension < 3:
        return ""
    if any(p.charge is None for p in points):
        return "the chirality of a node could not be settled"
    total = sum(p.charge or 0 for p in points)
    if total and not lines:  # lines can carry the rest
        return f"the chiralities add up to {total}, not to zero"
    return ""


def _result(
    case: Case,
    found: ClosingSearch,
    points: tuple[PointNode, ...],
    lines: tuple[NodalLine, ...],
    pockets: tuple[Pocket, ...],
    reason: str,
) -> NodeSearch:
    charges = [p.charge for p in points]
    settled = case.crystal.dimension == 3 and None not in charges
    lowest = min(found.clusters, key=lambda c: c.lowest_ev, default=None)
    return NodeSearch(
        filling=case.filling,
        points=points,
        lines=lines,
        pockets=pockets,
        elsewhere_ev=0.0 if found.exhausted else found.elsewhere_ev,
        complete=not reason,
        reason=reason,
        charge_sum=sum(c for c in charges if c is not None) if settled else None,
        reference=case.reference,
        attained_ev=None if lowest is None else lowest.lowest_ev,
        attained_k=None if lowest is None else as_vector(folded(lowest.lowest_k)),
        degenerate=found.degenerate,
        images=found.images,
        n_open=sum(len(c.k_frac) for c in found.clusters),
        n_solves=found.n_solves,
    )
