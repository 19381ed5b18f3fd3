"""The task on groups of bands below lower gaps; it runs only when it is asked for."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from topovet.errors import InputError
from topovet.invariants.lower_groups import Ground, LowerGroup, LowerGroups, compute_lower_groups
from topovet.model.declarations import Declarations
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.steps_physics import MeshEnergies
from topovet.pipeline.steps_proof import TOLERANCE, budget, proven_hamiltonian
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.eigen import one_blas_thread
from topovet.spectrum.proof.prove import ProvenHamiltonian, prove_direct_gap
from topovet.spectrum.results import Electrons
from topovet.symmetry.group_results import GroupTest
from topovet.symmetry.inversion import build_inversion
from topovet.symmetry.results import InversionTest, TimeReversalTest

ALL = "all"

SHARES = 4
"""Each lower gap has this part of the budget that the main gap has."""


def look_below_lower_gaps(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    inversion: InversionTest,
    electrons: Electrons,
    mesh: MeshEnergies,
    group: GroupTest | None,
) -> LowerGroups:
    """Indices of the lowest bands up to each lower gap."""
    asked = context.settings.get("lower_gaps")
    if asked is None:
        raise NotApplicable("not asked for; --lower-gaps does")
    lattice, basis = hamiltonian_with_basis.lattice, hamiltonian_with_basis.basis
    if asked != ALL and not all(0 < n < lattice.bloch.n_orb for n in asked):
        raise InputError(
            "--lower-gaps",
            found=", ".join(map(str, asked)) or "nothing",
            expected=f"numbers of bands from 1 to {lattice.bloch.n_orb - 1}",
            todo="name numbers below that of the Wannier functions, or all",
        )
    operator = None
    if inversion.present and basis is not None:
        operator = build_inversion(basis, declarations.crystal, np.array(inversion.centre))
    ground = Ground(
        bloch=lattice.bloch,
        periodic=declarations.crystal.periodic,
        kramers=time_reversal.present and lattice.model.spinful,
        time_reversal=time_reversal.present,
        inversion=operator,
        group=group,
    )
    found = compute_lower_groups(
        ground, mesh.energies_ev, electrons.filling, None if asked == ALL else asked
    )
    effort = context.settings["effort"]
    if effort not in TOLERANCE:
        return found
    proven = proven_hamiltonian(hamiltonian_with_basis, declarations.crystal, time_reversal, group)
    return replace(found, groups=tuple(_with_proof(g, proven, effort) for g in found.groups))


def _with_proof(group: LowerGroup, proven: ProvenHamiltonian, effort: str) -> LowerGroup:
    """The group with a bound of its gap; a share of the budget of the main gap each."""
    if group.status == "closed":
        return group
    with one_blas_thread():
        proof, _ = prove_direct_gap(
            proven,
            group.filling,
            attained_k=np.array(group.direct_k),
            tolerance=TOLERANCE[effort],
            max_solves=budget(effort, proven.model.n_orb) // SHARES,
        )
    return replace(group, proved_min_ev=proof.proved_min_ev if proof.proved_min_ev > 0 else None)


TASKS = (
    Task(
        "lower-gaps",
        "look at the bands below lower gaps",
        look_below_lower_gaps,
        needs=(
            "hamiltonian-with-basis",
            "declarations",
            "time-reversal",
            "inversion",
            "electrons",
            "mesh",
        ),
        wants=("group",),
        settings=("lower_gaps", "effort"),
        version=3,
    ),
)
