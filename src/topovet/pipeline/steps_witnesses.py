"""Task functions of the witnesses that follow Wilson loops, and of those on mirror planes."""

from __future__ import annotations

import numpy as np

from topovet.invariants.chern import compute_chern
from topovet.invariants.mirror_indicators import MirrorIndicator, compute_mirror_indicators
from topovet.invariants.mirror_witness import (
    MirrorWitness,
    compute_mirror_witness,
    proper_mirrors,
)
from topovet.invariants.results import ChernWitness, WilsonWitness
from topovet.invariants.wilson_sheet import CRITERIA
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.declarations import Declarations
from topovet.model.plane import invariant_planes
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.results import Electrons, GapSample
from topovet.symmetry.equivalent_planes import PLANES_SHARE, equivalent_planes, held_within
from topovet.symmetry.group_results import GroupTest
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import WannierOperator
from topovet.symmetry.results import SpaceGroup, TimeReversalTest
from topovet.units import MEV_PER_EV

MIRROR_SHARE = 0.25
"""Mirrors that hold to within this share of it are used: the average over the mirror moves H by
half of the violation, which cannot close a gap that is larger."""


def follow_wilson_loops(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    gap: GapSample | None,
    group: GroupTest | None,
) -> WilsonWitness:
    """Z2 indices from the flow of hybrid Wannier centres."""
    _check_gap(gap)
    effort, periodic = context.settings["effort"], declarations.crystal.periodic
    alike: tuple[tuple[str, ...], ...] = ()
    if gap is not None and effort != "thorough":
        alike = equivalent_planes(invariant_planes(periodic), group, gap.direct_ev)
    witness = compute_wilson(
        hamiltonian_with_basis.lattice.bloch,
        electrons.filling,
        periodic,
        time_reversal=time_reversal.present,
        spinful=bool(declarations.spinful),
        criteria=CRITERIA[effort],
        equivalent=alike,
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
        hamiltonian_with_basis.lattice.bloch,
        electrons.filling,
        declarations.crystal.periodic,
        CRITERIA[context.settings["effort"]],
    )


def count_mirror_chern_numbers(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    space_group: SpaceGroup,
    group: GroupTest,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    gap: GapSample | None,
) -> MirrorWitness:
    """Mirror Chern numbers on the invariant planes of every mirror that H has."""
    _check_mirrors_apply(declarations, time_reversal, electrons)
    _check_gap(gap)
    operators = _operators(hamiltonian_with_basis, declarations, space_group)
    within = _held(group, gap, MIRROR_SHARE)
    reflections = [i for i, o in operators.items() if _is_reflection(o)]
    usable = [
        (operators[i], group.operations[i].judged_mev or 0.0) for i in reflections if i in within
    ]
    mirrors, left_out = proper_mirrors(usable, declarations.crystal)
    if broken := len(reflections) - len(usable):
        left_out = (*left_out, f"{broken} of {len(reflections)} mirrors and glides are broken on H")
    if not mirrors:
        raise NotApplicable("; ".join(left_out) or "the group has no mirror")
    symmetries = [operators[i] for i in _held(group, gap, PLANES_SHARE) if i in operators]
    return compute_mirror_witness(
        hamiltonian_with_basis.lattice.bloch,
        mirrors,
        () if context.settings["effort"] == "thorough" else symmetries,
        declarations.crystal,
        electrons.filling,
        CRITERIA[context.settings["effort"]],
        left_out=left_out,
    )


def count_mirror_indicators(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    space_group: SpaceGroup,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
) -> tuple[MirrorIndicator, ...]:
    """Mirror Chern numbers modulo n, from rotation eigenvalues alone."""
    _check_mirrors_apply(declarations, time_reversal, electrons)
    operators = _operators(hamiltonian_with_basis, declarations, space_group)
    if len(operators) < len(space_group.rotations):
        raise NotApplicable("the declared orbitals are not closed under the group")
    found = compute_mirror_indicators(
        hamiltonian_with_basis.lattice.bloch,
        list(operators.values()),
        declarations.crystal,
        electrons.filling,
    )
    if not found:
        raise NotApplicable("no axis of order 3, 4 or 6 has a mirror normal to it")
    return found


def _check_mirrors_apply(
    declarations: Declarations, time_reversal: TimeReversalTest, electrons: Electrons
) -> None:
    if not (declarations.spinful and time_reversal.present):
        raise NotApplicable("counted only for spinors with time reversal")
    if electrons.filling % 2:
        raise NotApplicable("an odd filling leaves a Kramers pair half filled")


def _operators(
    based: BasedHamiltonian, declared: Declarations, space_group: SpaceGroup
) -> dict[int, WannierOperator]:
    """Operators of the structure's operations by their position, where there is one."""
    if based.basis is None:
        raise NotApplicable(f"no operators can be built: {based.reason}")
    built = build_operators(
        based.basis, declared.crystal, space_group.rotations, space_group.translations
    )
    return dict(zip(built.indices.tolist(), built.operators, strict=True))


def _is_reflection(operator: WannierOperator) -> bool:
    w = operator.rotation
    return bool(np.trace(w) == 1 and np.array_equal(w @ w, np.eye(3)))


def _held(group: GroupTest, gap: GapSample | None, share: float) -> list[int]:
    """Operations whose violation is at most a share of the gap; none where the gap is unknown."""
    return [] if gap is None else held_within(group, share * MEV_PER_EV * gap.direct_ev)


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
        wants=("gap", "group"),
        settings=("effort",),
        version=2,
    ),
    Task(
        "chern",
        "count Chern numbers where time reversal is broken",
        count_chern_numbers,
        needs=("hamiltonian-with-basis", "declarations", "time-reversal", "electrons"),
        wants=("gap",),
        settings=("effort",),
        version=2,
    ),
    Task(
        "mirror-chern",
        "count mirror Chern numbers on mirror planes",
        count_mirror_chern_numbers,
        needs=(
            "hamiltonian-with-basis",
            "declarations",
            "space-group",
            "group",
            "time-reversal",
            "electrons",
        ),
        wants=("gap",),
        settings=("effort",),
    ),
    Task(
        "mirror-indicators",
        "read mirror Chern numbers modulo n off rotation eigenvalues",
        count_mirror_indicators,
        needs=(
            "hamiltonian-with-basis",
            "declarations",
            "space-group",
            "time-reversal",
            "electrons",
        ),
    ),
)
