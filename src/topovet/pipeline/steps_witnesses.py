"""Task functions of the witnesses that follow Wilson loops."""

from __future__ import annotations

import numpy as np

from topovet.invariants.chern import compute_chern
from topovet.invariants.results import ChernWitness, WilsonWitness
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.declarations import Declarations
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.results import Electrons, GapSample
from topovet.symmetry.results import TimeReversalTest


def follow_wilson_loops(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    gap: GapSample | None,
) -> WilsonWitness:
    """Z2 indices from the flow of hybrid Wannier centres."""
    _check_gap(gap)
    witness = compute_wilson(
        hamiltonian_with_basis.lattice.bloch,
        electrons.filling,
        declarations.crystal.periodic,
        time_reversal=time_reversal.present,
        spinful=bool(declarations.spinful),
    )
    if witness.status == "not-applicable":
        raise NotApplicable(witness.reason)
    return witness


def count_chern_numbers(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    gap: GapSample | None,
) -> ChernWitness:
    """Chern numbers, where time reversal does not force them to vanish."""
    if time_reversal.present:
        raise NotApplicable("time reversal makes all Chern numbers 0")
    _check_gap(gap)
    return compute_chern(
        hamiltonian_with_basis.lattice.bloch, electrons.filling, declarations.crystal.periodic
    )


def _check_gap(gap: GapSample | None) -> None:
    """Indices of bands that touch do not exist, and the budget would be spent in vain."""
    if gap is not None and gap.status == "gapless":
        k = ", ".join(f"{c:.4f}" for c in np.asarray(gap.direct_k))
        raise NotApplicable(f"the occupied bands touch the others at k = ({k})")


TASKS = (
    Task(
        "wilson",
        "follow Wilson loops over the invariant planes",
        follow_wilson_loops,
        needs=("hamiltonian-with-basis", "declarations", "time-reversal", "electrons"),
        wants=("gap",),
    ),
    Task(
        "chern",
        "count Chern numbers where time reversal is broken",
        count_chern_numbers,
        needs=("hamiltonian-with-basis", "declarations", "time-reversal", "electrons"),
        wants=("gap",),
    ),
)
