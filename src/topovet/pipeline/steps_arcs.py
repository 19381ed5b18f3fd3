"""Task function that confronts Weyl points with the levels of a surface."""

from __future__ import annotations

from topovet.boundary.arcs.results import ArcSurvey
from topovet.boundary.arcs.survey import separating_surface, survey_arcs
from topovet.boundary.witness import CRITERIA
from topovet.invariants.nodes.results import NodeSearch
from topovet.model.declarations import Declarations
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_boundary import chosen_surface
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.results import Electrons
from topovet.symmetry.results import SpaceGroup


def follow_arcs(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    electrons: Electrons,
    nodes: NodeSearch,
    space_group: SpaceGroup | None,
) -> ArcSurvey:
    """Levels around the projections of the nodes, and the arcs between them.

    On the surface that is asked for; else on the natural one, or where chiralities cancel there on
    the next likeliest cleavage plane on which they do not.
    """
    _check(declarations, nodes)
    lattice, crystal = hamiltonian_with_basis.lattice, declarations.crystal
    basis = hamiltonian_with_basis.basis
    positions = None if basis is None else basis.positions_frac
    choice = chosen_surface(context, hamiltonian_with_basis, declarations, electrons, space_group)
    miller, chosen_by = choice.miller, choice.chosen_by
    if choice.ranked:
        candidates = [plane.miller for plane in choice.ranked]
        separating = separating_surface(nodes.points, crystal, candidates)
        if separating is not None and separating != miller:
            miller, chosen_by = separating, "separates the chiralities"
    effort = context.settings["effort"]
    return survey_arcs(
        lattice.model,
        crystal,
        positions,
        nodes,
        miller,
        CRITERIA[effort],
        chosen_by=chosen_by,
        effort=effort,
    )


def _check(declarations: Declarations, nodes: NodeSearch) -> None:
    if declarations.crystal.dimension != 3:
        raise NotApplicable("arcs are sought on surfaces of three-dimensional crystals")
    if not nodes.complete:
        raise NotApplicable("the list of nodes may be incomplete")
    if nodes.lines:
        raise NotApplicable("nodal lines leave no gap around the nodes")
    if not any(p.charge for p in nodes.points):
        raise NotApplicable("no node has a chirality")
    if any(p.charge is None for p in nodes.points):
        raise NotApplicable("the chirality of a node is not settled")


TASKS = (
    Task(
        "fermi-arcs",
        "count surface levels around Weyl points, follow their arcs",
        follow_arcs,
        needs=("hamiltonian-with-basis", "declarations", "electrons", "nodes"),
        wants=("space-group",),
        settings=("surface", "effort"),
    ),
)
