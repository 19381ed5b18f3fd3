"""Task functions that prove the direct and the indirect gap at the filling, and map the former."""

from __future__ import annotations

import numpy as np

from topovet.model.crystal import Crystal
from topovet.model.declarations import Declarations
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.steps_physics import MeshEnergies
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.eigen import one_blas_thread
from topovet.spectrum.gap import UNRESOLVED_EV
from topovet.spectrum.gap_map import choose_axis, map_gap
from topovet.spectrum.proof.prove import (
    ProvenHamiltonian,
    prove_direct_gap,
    prove_indirect_gap,
)
from topovet.spectrum.proof.results import ProvedGap, ProvedIndirectGap
from topovet.spectrum.proof.symmetry_use import Images, images_of
from topovet.spectrum.results import Electrons, GapMap, GapSample
from topovet.symmetry.group_results import GroupTest
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import NotClosedError, WannierOperator, with_time_reversal
from topovet.symmetry.results import TimeReversalTest

TOLERANCE = {"standard": 0.05, "thorough": 0.02}
"""How near the proved gap is to come to the attained one, by effort; "quick" proves nothing."""

INDIRECT_TOLERANCE = {"standard": 0.1, "thorough": 0.02}
"""The same for the indirect gap, of which little more than the sign is asked."""

LEAST_TOLERANCE_EV = 0.002
"""No indirect gap is proved more closely than this."""

SOLVES_FOR_30 = {"standard": 16_000, "thorough": 160_000}
"""Eigenvalue problems allowed for 30 orbitals, by effort: some 20 and 200 seconds of one core."""

LEAST_SOLVES, MOST_SOLVES = 500, 400_000


def prove_gap(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    gap: GapSample,
    group: GroupTest | None,
) -> ProvedGap:
    """Lower bound of the direct gap that holds at every k, with its certificate."""
    effort = context.settings["effort"]
    if effort not in TOLERANCE:
        raise NotApplicable(f"at effort {effort} gaps are sampled, not proved")
    if gap.status == "gapless":
        raise NotApplicable("the direct gap closes: there is nothing to prove")
    proven = proven_hamiltonian(hamiltonian_with_basis, declarations.crystal, time_reversal, group)
    with one_blas_thread():
        proof, certificate = prove_direct_gap(
            proven,
            electrons.filling,
            attained_k=np.array(gap.direct_k),
            tolerance=TOLERANCE[effort],
            max_solves=budget(effort, proven.model.n_orb),
        )
    return ProvedGap(proof, certificate)


def prove_indirect(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    gap: GapSample,
    group: GroupTest | None,
) -> ProvedIndirectGap:
    """Lower bound of the indirect gap, from a bound of each band edge that holds at every k."""
    effort = context.settings["effort"]
    if effort not in INDIRECT_TOLERANCE:
        raise NotApplicable(f"at effort {effort} gaps are sampled, not proved")
    if gap.indirect_ev <= 0:
        raise NotApplicable("the bands overlap in energy, as the edges that were met show")
    proven = proven_hamiltonian(hamiltonian_with_basis, declarations.crystal, time_reversal, group)
    with one_blas_thread():
        proof, certificates = prove_indirect_gap(
            proven,
            electrons.filling,
            valence_k=np.array(gap.vbm_k),
            conduction_k=np.array(gap.cbm_k),
            tolerance_ev=max(INDIRECT_TOLERANCE[effort] * gap.indirect_ev, LEAST_TOLERANCE_EV),
            max_solves=budget(effort, proven.model.n_orb),
        )
    return ProvedIndirectGap(proof, *certificates)


def map_direct_gap(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    mesh: MeshEnergies,
    electrons: Electrons,
    gap: GapSample,
) -> GapMap:
    """The direct gap over the plane through its minimum that holds most of what is low."""
    if context.settings["effort"] == "quick":
        raise NotApplicable("at effort quick the gap is not mapped")
    n, crystal, k_frac = electrons.filling, declarations.crystal, np.array(gap.direct_k)
    axis = choose_axis(
        mesh.energies_ev[..., n] - mesh.energies_ev[..., n - 1], k_frac, crystal.periodic
    )
    found = map_gap(hamiltonian_with_basis.lattice.bloch, crystal, n, k_frac, axis)
    if found.gap_ev.max() < UNRESOLVED_EV:
        raise NotApplicable("the two bands nearly touch all over the plane")
    return found


def proven_hamiltonian(
    hamiltonian_with_basis: BasedHamiltonian,
    crystal: Crystal,
    time_reversal: TimeReversalTest,
    group: GroupTest | None,
) -> ProvenHamiltonian:
    """The Hamiltonian with the symmetries that a proof may use."""
    lattice = hamiltonian_with_basis.lattice
    images = images_on_offer(hamiltonian_with_basis, crystal, time_reversal, group)
    return ProvenHamiltonian(lattice.model, lattice.bloch, crystal, images)


def budget(effort: str, n_orb: int) -> int:
    """Eigenvalue problems that a proof may take: the cost of one grows as about n_orb^2.5."""
    wanted = SOLVES_FOR_30[effort] * (30 / n_orb) ** 2.5
    return int(np.clip(wanted, LEAST_SOLVES, MOST_SOLVES))


def images_on_offer(
    hamiltonian_with_basis: BasedHamiltonian,
    crystal: Crystal,
    time_reversal: TimeReversalTest,
    group: GroupTest | None,
) -> Images:
    """What the Hamiltonian's own symmetries do to k, each with a residual that holds at every k."""
    operators: list[WannierOperator] = []
    if group is not None and hamiltonian_with_basis.basis is not None:
        basis = hamiltonian_with_basis.basis
        tests = [group.tests[i] for i in group.own.members]
        built = build_operators(
            basis,
            crystal,
            np.array([test.rotation for test in tests]),
            np.array([test.translation for test in tests]),
        )
        for i, operator in zip(built.indices, built.operators, strict=True):
            if not tests[i].antiunitary:
                operators.append(operator)
            elif not time_reversal.present:  # else it is a product with time reversal itself
                try:
                    operators.append(with_time_reversal(operator, basis))
                except NotClosedError:
                    continue  # offered by nobody, hence not used
    model = hamiltonian_with_basis.lattice.model
    return images_of(model, operators, time_reversal=time_reversal.present)


TASKS = (
    Task(
        "gap-proof",
        "prove the direct gap",
        prove_gap,
        needs=("hamiltonian-with-basis", "declarations", "time-reversal", "electrons", "gap"),
        wants=("group",),
        settings=("effort",),
    ),
    Task(
        "indirect-gap-proof",
        "prove the indirect gap",
        prove_indirect,
        needs=("hamiltonian-with-basis", "declarations", "time-reversal", "electrons", "gap"),
        wants=("group",),
        settings=("effort",),
    ),
    Task(
        "gap-map",
        "map the direct gap around its minimum",
        map_direct_gap,
        needs=("hamiltonian-with-basis", "declarations", "mesh", "electrons", "gap"),
        settings=("effort",),
    ),
)
