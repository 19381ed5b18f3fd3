"""The task on groups of bands below lower gaps; it runs only when it is asked for."""

from __future__ import annotations

import numpy as np

from topovet.errors import InputError
from topovet.invariants.lower_groups import Ground, LowerGroups, compute_lower_groups
from topovet.model.declarations import Declarations
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.steps_physics import MeshEnergies
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.results import Electrons
from topovet.symmetry.group_results import GroupTest
from topovet.symmetry.inversion import build_inversion
from topovet.symmetry.results import InversionTest, TimeReversalTest

ALL = "all"


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
    return compute_lower_groups(
        ground, mesh.energies_ev, electrons.filling, None if asked == ALL else asked
    )


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
        settings=("lower_gaps",),
    ),
)
