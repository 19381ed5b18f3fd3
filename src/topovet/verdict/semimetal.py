"""The class of a Hamiltonian whose gap closes: the rule, in one place.

A class is given only if all of this holds, and `undetermined` otherwise:

1. the list of nodes is complete: every box without a proved bound belongs to one of them, and
   chiralities add up to zero;
2. each of them is held: a point by its chirality or by a symmetry that the Hamiltonian has, a line
   by a symmetry. A fourfold point that nothing holds is a transition, not a semimetal;
3. what holds them is out of reach of the known errors: the gap on the surfaces around them is at
   least twice their sum, and at least `LEAST_BARRIER_EV`;
4. they are few;
5. the Hamiltonian keeps something of its structure's symmetry: noise keeps nothing and makes nodes;
6. no filling near by would be an insulator, unless the input gives a Fermi energy: at a wrong
   filling the "gap" lies inside a group of bands, where crossings abound.

Then the kind that comes nearest to the Fermi level names the class, if it comes within
`NEAR_FERMI_EV`; if none does, the bulk is an ordinary metal at that level: `metal`.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from topovet.invariants.nodes.results import NodalLine, NodeSearch, PointNode
from topovet.notation import k_text, mev
from topovet.verdict.budget import error_budget, total_error
from topovet.verdict.findings import Findings

SEMIMETALS = ("weyl-semimetal", "dirac-semimetal", "nodal-line", "metal")

CLASS_OF_KIND = {"weyl": "weyl-semimetal", "dirac": "dirac-semimetal", "line": "nodal-line"}

NEAR_FERMI_EV = 0.25
"""Nodes within this of the Fermi level name the class: ten times kT at room temperature, and what
photoemission papers call near (practice)."""

LEAST_BARRIER_EV = 1e-3
"""Gap that must stand on a surface around a node: below it a sampled gap counts as unresolved."""

MOST_POINTS, MOST_LINES = 48, 24
"""Points and lines of a whole zone, images included: 48 is one orbit in the largest point group."""


@dataclass(frozen=True, slots=True)
class NodeConclusion:
    """A class of `SEMIMETALS`, or none and why.

    Attributes
    ----------
    class_
        Empty where none can be given.
    grounds
        One clause each.
    barrier_ev
        Smallest gap on the surfaces around what was found, eV; None where nothing was.
    """

    class_: str
    grounds: tuple[str, ...]
    barrier_ev: float | None = None


def conclude_nodes(findings: Findings) -> NodeConclusion:
    """What the nodes allow to be said; an empty class where there are none."""
    nodes = findings.nodes
    if nodes is None:
        why = findings.missing.get("nodes", "nodes were not looked for")
        return NodeConclusion("", (f"nodes: {why}",))
    reason = next(_objections(findings, nodes), "")
    barrier = _barrier(nodes)
    if reason:
        return NodeConclusion("", (reason,), barrier)
    kind, away = min(_by_distance(nodes), key=lambda item: abs(item[1]))
    near = abs(away) <= NEAR_FERMI_EV
    class_ = CLASS_OF_KIND[kind] if near else "metal"
    grounds = [
        f"{describe(nodes)}, and everywhere else the direct gap is proved to exceed "
        f"{mev(1000 * nodes.elsewhere_ev)}",
        f"the nearest {'line' if kind == 'line' else 'node'} lies {mev(1000 * abs(away))} from "
        f"{reference_words(nodes)}, at filling {nodes.filling}",
    ]
    if not near:
        grounds.append(f"none comes within {mev(1000 * NEAR_FERMI_EV)} of it: a metal")
    arcs = findings.arcs
    if arcs is not None and arcs.status == "agree":
        counted = sum(c.status == "ok" for c in arcs.loops)
        grounds.append(
            f"surface levels around {counted} of {len(arcs.projections)} projections of nodes "
            "count the same chirality"
        )
    return NodeConclusion(class_, tuple(grounds), barrier)


def describe(nodes: NodeSearch) -> str:
    """What was found, e.g. "2 Weyl points (chiralities ±1)"."""
    parts = []
    names = {
        "weyl": "Weyl point",
        "dirac": "Dirac point",
        "multifold": "multifold point",
        "accidental": "accidental touching",
        "uncharacterised": "uncharacterised point",
    }
    for kind, name in names.items():
        chosen = [p for p in nodes.points if p.kind == kind]
        if chosen:
            parts.append(f"{len(chosen)} {name}{'s' if len(chosen) > 1 else ''}{_charges(chosen)}")
    n_lines = sum(line.n_images for line in nodes.lines)
    if n_lines:
        parts.append(f"{n_lines} nodal line{'s' if n_lines > 1 else ''}")
    return " and ".join(parts) or "no closing"


def reference_words(nodes: NodeSearch) -> str:
    """What energies of nodes are measured from."""
    if nodes.reference.source == "given":
        return "the Fermi energy given"
    return "the Fermi level that the filling gives"


def _charges(points: list[PointNode]) -> str:
    sizes = sorted({abs(p.charge) for p in points if p.charge})
    return f" (chiralities {', '.join(f'±{c}' for c in sizes)})" if sizes else ""


def _objections(findings: Findings, nodes: NodeSearch) -> Iterator[str]:
    """Why no class is given, the weightiest first."""
    if nodes.degenerate:
        yield nodes.reason
    if not nodes.complete:
        yield f"the list of nodes may be incomplete: {nodes.reason}"
    if not nodes.points and not nodes.lines:
        yield "no closing was found"
    for point in nodes.points:
        if point.kind == "accidental":
            yield (
                f"at k = {k_text(point.k)} {point.multiplicity} bands touch without chirality, and "
                "no symmetry was found that holds them: an accident, or a transition between "
                "insulators"
            )
        elif point.kind not in CLASS_OF_KIND:
            where = k_text(point.k)
            yield f"the touching of {point.multiplicity} bands at k = {where} is of no class"
    if any(not line.held for line in nodes.lines):
        yield "no symmetry was found that holds a nodal line"
    barrier = _barrier(nodes)
    least = max(2 * total_error(error_budget(findings)), 1000 * LEAST_BARRIER_EV)
    if barrier is not None and 1000 * barrier < least:
        yield (
            f"around a node the gap is only {mev(1000 * barrier)} wide, less than the "
            f"{mev(least)} that the known errors ask for"
        )
    n_lines = sum(line.n_images for line in nodes.lines)
    if len(nodes.points) > MOST_POINTS or n_lines > MOST_LINES:
        count = f"{len(nodes.points)} points and {n_lines} lines"
        yield f"{count} are too many to be the nodes of a semimetal"
    yield from _lost_symmetry(findings)
    other = nodes.reference.other_filling
    if other is not None and nodes.reference.source != "given":
        yield (
            f"with {other} filled bands in place of {nodes.filling} it would be an insulator with "
            f"a gap of {mev(1000 * (nodes.reference.other_gap_ev or 0.0))}: the filling is in doubt"
        )


def _lost_symmetry(findings: Findings) -> Iterator[str]:
    group, structure = findings.group, findings.space_group
    if group is None:
        if not findings.time_reversal.present:
            yield "time reversal is broken and no operation of the structure could be tested"
        return
    kept = [group.tests[i] for i in group.own.members]
    beside_identity = any(not np.array_equal(t.rotation, np.eye(3)) for t in kept)
    if structure is not None and len(structure.rotations) > 1 and not beside_identity:
        yield "the Hamiltonian has lost every operation of its structure, as noise would do it"


def _barrier(nodes: NodeSearch) -> float | None:
    gaps = [p.surface_gap_ev for p in nodes.points]
    gaps += [line.loop_gap_ev for line in nodes.lines]
    return min(gaps, default=None)


def _by_distance(nodes: NodeSearch) -> Iterator[tuple[str, float]]:
    """Kind and distance from the reference of each point and line."""
    lines: tuple[NodalLine, ...] = nodes.lines
    yield from (("line", line.from_reference_ev) for line in lines)
    yield from ((p.kind, p.from_reference_ev) for p in nodes.points)
