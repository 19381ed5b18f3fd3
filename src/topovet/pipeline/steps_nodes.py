"""Task function that looks for the nodes of a gap that closes."""

from __future__ import annotations

import numpy as np

from topovet.invariants.nodes.points import Case
from topovet.invariants.nodes.results import NodeSearch, Reference
from topovet.invariants.nodes.survey import survey_closings
from topovet.model.crystal import Crystal
from topovet.model.declarations import Declarations
from topovet.model.fourier import BlochSum
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.steps_proof import TOLERANCE, budget, proven_hamiltonian
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.eigen import mesh_eigenvalues, one_blas_thread
from topovet.spectrum.gap import choose_mesh
from topovet.spectrum.proof.results import ProvedGap
from topovet.spectrum.results import Electrons, GapSample
from topovet.symmetry.group_results import GroupTest
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import NotClosedError, WannierOperator, with_time_reversal
from topovet.symmetry.results import TimeReversalTest

MOST_SOLVES = {"standard": 40_000, "thorough": 400_000}
"""Cap of the budget for few orbitals: where bands cross on a whole surface it is always spent."""

OTHER_FILLINGS = 2
"""Fillings up to so many bands away are looked at for an insulator."""

OTHER_GAP_EV = 0.05
"""Indirect gap, on the mesh, from which on another filling is called an insulator."""


def look_for_nodes(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    gap: GapSample,
    group: GroupTest | None,
    gap_proof: ProvedGap | None,
) -> NodeSearch:
    """Every closing of the gap at the filling, characterised."""
    effort = context.settings["effort"]
    if effort not in TOLERANCE:
        raise NotApplicable(f"at effort {effort} nodes are not looked for")
    suspected = gap_proof is not None and gap_proof.proof.status == "closing suspected"
    if gap.status != "gapless" and not suspected:
        raise NotApplicable("no closing of the gap was met")
    lattice, crystal = hamiltonian_with_basis.lattice, declarations.crystal
    known_k = [gap.direct_k] if gap_proof is None else [gap.direct_k, gap_proof.proof.k_frac]
    proven = proven_hamiltonian(hamiltonian_with_basis, crystal, time_reversal, group)
    with one_blas_thread():
        return survey_closings(
            proven,
            Case(
                bloch=lattice.bloch,
                crystal=crystal,
                filling=electrons.filling,
                operators=own_operators(hamiltonian_with_basis, crystal, time_reversal, group),
                spinful=lattice.model.spinful,
                reference=find_reference(lattice.bloch, crystal, electrons),
            ),
            np.array(known_k),
            max_solves=min(MOST_SOLVES[effort], budget(effort, lattice.model.n_orb)),
        )


def own_operators(
    hamiltonian_with_basis: BasedHamiltonian,
    crystal: Crystal,
    time_reversal: TimeReversalTest,
    group: GroupTest | None,
) -> tuple[WannierOperator, ...]:
    """The Hamiltonian's own group on the Wannier functions, antiunitary operations included.

    Empty without declared orbitals, or where some operation cannot be built: half a group would
    say wrong things.
    """
    basis = hamiltonian_with_basis.basis
    if group is None or basis is None:
        return ()
    tests = [group.tests[i] for i in group.own.members]
    unitary = [test for test in tests if not test.antiunitary]
    reversing = unitary if time_reversal.present else [t for t in tests if t.antiunitary]
    operators: list[WannierOperator] = []
    for chosen, antiunitary in ((unitary, False), (reversing, True)):
        if not chosen:
            continue
        built = build_operators(
            basis,
            crystal,
            np.array([test.rotation for test in chosen]),
            np.array([test.translation for test in chosen]),
        )
        if len(built.operators) < len(chosen):
            return ()
        try:
            operators += [
                with_time_reversal(o, basis) if antiunitary else o for o in built.operators
            ]
        except NotClosedError:
            return ()
    return tuple(operators)


def find_reference(bloch: BlochSum, crystal: Crystal, electrons: Electrons) -> Reference:
    """The Fermi level, and whether a filling near by would be an insulator.

    Without a Fermi energy: half-way between the last filled and the first empty of all levels of a
    mesh, the filling times as many of them filled as there are points.
    """
    mesh = choose_mesh(crystal, "quick")
    levels = mesh_eigenvalues(bloch, mesh, even=False).reshape(-1, bloch.n_orb)
    if electrons.fermi_ev is not None:
        return Reference(electrons.fermi_ev, "given", *_insulator_near(levels, electrons.filling))
    n_filled = electrons.filling * len(levels)
    ordered = np.sort(levels.reshape(-1))
    middle = float(ordered[n_filled - 1 : n_filled + 1].mean())
    return Reference(middle, "filling", *_insulator_near(levels, electrons.filling))


def _insulator_near(
    levels: np.ndarray[tuple[int, ...], np.dtype[np.float64]], filling: int
) -> tuple[int | None, float | None]:
    """The filling near by with the widest indirect gap on the mesh, and that gap."""
    found = []
    for step in range(-OTHER_FILLINGS, OTHER_FILLINGS + 1):
        other = filling + step
        if step and 0 < other < levels.shape[1]:
            found.append((float(levels[:, other].min() - levels[:, other - 1].max()), other))
    gap, other = max(found, default=(0.0, 0))
    return (other, gap) if gap > OTHER_GAP_EV else (None, None)


TASKS = (
    Task(
        "nodes",
        "look for the nodes of a gap that closes",
        look_for_nodes,
        needs=("hamiltonian-with-basis", "declarations", "time-reversal", "electrons", "gap"),
        wants=("group", "gap-proof"),
        settings=("effort",),
    ),
)
