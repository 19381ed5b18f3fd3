"""The Hamiltonian's own symmetry group, found by testing and set beside that of its structure.

Every operation of the structure is tested (`symmetry.operation_test`), then time reversal, and,
where that is broken, its product with each of them. What holds must form a group; it can be smaller
than the structure's (strain, magnetism, broken Wannier functions) or larger (a structure file less
symmetric than the Hamiltonian), for which operations are tried that the structure nearly has.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from topovet.arrays import BoolArray, IntArray
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.model.hamiltonian import TightBindingModel
from topovet.symmetry.beyond_structure import find_beyond_structure
from topovet.symmetry.group_results import FoundGroup, GroupTest, OperationTest
from topovet.symmetry.operation_test import (
    BANDS_MEV,
    HOLDS_MEV,
    Probe,
    measure_operation,
    prepare_probe,
    untested,
)
from topovet.symmetry.operations import (
    OperationGroup,
    largest_closed_subset,
    multiplication_table,
)
from topovet.symmetry.operator_set import OperatorSet, build_operators
from topovet.symmetry.operators import (
    NotClosedError,
    WannierOperator,
    factor_system,
    with_time_reversal,
)
from topovet.symmetry.results import SpaceGroup
from topovet.symmetry.spacegroup import name_group, name_magnetic_group


def measure_group(
    model: TightBindingModel,
    bloch: BlochSum,
    unshifted_bloch: BlochSum | None,
    basis: OrbitalBasis,
    crystal: Crystal,
    space_group: SpaceGroup,
    mp_grid: tuple[int, int, int] | None,
    *,
    filling: int | None = None,
) -> GroupTest:
    """Test every operation of the structure, time reversal, and what else might hold.

    Judged on points of the coarse mesh where one is known: there `use_ws_distance` shifts play no
    role, which can only spoil a symmetry. Many small matrix products: best run with BLAS held to
    one thread.

    Parameters
    ----------
    model, bloch
        The same Hamiltonian in real space and as a Fourier sum; spinors interlaced.
    unshifted_bloch
        Read without `use_ws_distance` shifts, with the same order of functions; None where no
        shifts were applied.
    basis, crystal, space_group
        As declared; operations of the structure in the Hamiltonian's cell.
    mp_grid
        Coarse mesh; None where unknown.
    filling
        Occupied bands; None where unknown, and nothing is then said about bands.

    Raises
    ------
    NotClosedError
        Not even the identity has an operator: functions are declared twice.
    """
    probe = prepare_probe(model, bloch, unshifted_bloch, crystal.periodic, mp_grid, filling)
    structure = OperationGroup(crystal.cell, space_group.rotations, space_group.translations)
    tests, operators = _test_structure(probe, structure, basis, crystal)
    holds = np.array([test.holds for test in tests])
    own = _found_group(structure, tests, holds)
    in_bands = None
    if filling is not None:
        passes = np.array([bool(test.in_bands) for test in tests])
        in_bands = _found_group(structure, tests, passes)
    beyond = find_beyond_structure(probe, structure, holds, basis, crystal)
    grey = holds[structure.n]  # time reversal is then left to itself: it commutes with the rest
    members = [i for i in own.members if not (grey and tests[i].antiunitary)]
    return GroupTest(
        structure_number=space_group.number,
        structure_symbol=space_group.symbol,
        tests=tuple(tests),
        n_structure=structure.n,
        own=own,
        in_bands=in_bands,
        additional=beyond.tests,
        larger_number=beyond.number,
        larger_symbol=beyond.symbol,
        n_candidates=beyond.n_candidates,
        closure_defect=factor_system([operators[i] for i in members]).defect,
        n_k=len(probe.sampled.k_frac),
        n_mesh=len(probe.mesh.k_frac),
        tolerance_mev=HOLDS_MEV,
        band_tolerance_mev=BANDS_MEV,
    )


def _test_structure(
    probe: Probe, structure: OperationGroup, basis: OrbitalBasis, crystal: Crystal
) -> tuple[list[OperationTest], dict[int, WannierOperator]]:
    """Tests in the order of `GroupTest.tests`, and the operators of those that have one."""
    built = build_operators(basis, crystal, structure.rotations, structure.translations)
    if not built.operators:
        raise NotClosedError(f"no operation has an operator: {built.reasons[0]}")
    at = dict(zip(built.indices.tolist(), built.operators, strict=True))
    order = structure.reversed_order
    theta, theta_operator = _test_reversed(probe, structure, order[0], at, built, basis)
    kramers = theta.holds and probe.model.spinful
    tests = [
        measure_operation(probe, at[i], structure.name(i), kramers=kramers)
        if i in at
        else _missing(structure, i, built.reasons[i])
        for i in range(structure.n)
    ]
    tests.append(theta)
    if theta_operator is not None:
        at[structure.n] = theta_operator
    for i in [] if theta.holds else order[1:]:
        test, operator = _test_reversed(probe, structure, i, at, built, basis)
        if operator is not None:
            at[len(tests)] = operator
        tests.append(test)
    return _without_empty_evidence(tests, kramers, crystal.periodic), at


def _without_empty_evidence(
    tests: list[OperationTest], kramers: bool, periodic: tuple[bool, bool, bool]
) -> list[OperationTest]:
    """Tests with `in_bands` withdrawn where equal energies follow from operations that hold.

    E(gk) = E(k) says something of g only if no operation that holds takes k to gk. The inversion
    beside time reversal has evidence of its own in the pairs that both demand.
    """
    actions = [_k_action(test, periodic) for test in tests]
    held = [action for test, action in zip(tests, actions, strict=True) if test.holds]
    if any(test.holds and test.antiunitary and np.trace(test.rotation) == 3 for test in tests):
        held += [-action for action in held]  # products with time reversal are not listed
    known = {action.tobytes() for action in held}
    return [
        replace(test, in_bands=None)
        if test.in_bands
        and not test.holds
        and action.tobytes() in known
        and not (kramers and np.trace(test.rotation) == -3)
        else test
        for test, action in zip(tests, actions, strict=True)
    ]


def _k_action(test: OperationTest, periodic: tuple[bool, bool, bool]) -> IntArray:
    """W, or -W with time reversal, along periodic directions: equal where all k' = k W^-1 are."""
    sign, kept = -1 if test.antiunitary else 1, np.flatnonzero(periodic)
    return np.asarray(sign * test.rotation[np.ix_(kept, kept)], dtype=np.int64)


def _test_reversed(
    probe: Probe,
    structure: OperationGroup,
    i: int,
    at: dict[int, WannierOperator],
    built: OperatorSet,
    basis: OrbitalBasis,
) -> tuple[OperationTest, WannierOperator | None]:
    """Product of operation i with time reversal."""
    if i not in at:
        return _missing(structure, i, built.reasons[i], antiunitary=True), None
    try:
        operator = with_time_reversal(at[i], basis)
    except NotClosedError as error:
        return _missing(structure, i, str(error), antiunitary=True), None
    return measure_operation(probe, operator, structure.name(i, antiunitary=True)), operator


def _missing(
    structure: OperationGroup, i: int, reason: str, *, antiunitary: bool = False
) -> OperationTest:
    return untested(
        structure.name(i, antiunitary=antiunitary),
        structure.rotations[i],
        structure.translations[i],
        reason,
        antiunitary=antiunitary,
    )


def _found_group(
    structure: OperationGroup, tests: list[OperationTest], passes: BoolArray
) -> FoundGroup:
    """The largest group among what passes, with its names.

    Among equally large ones that of the better operators: bands alone cannot tell an operation
    from its product with inversion.
    """
    n, judged = structure.n, [test.judged_mev for test in tests]
    bad = np.array([np.inf if violation is None else violation for violation in judged])
    rotations, translations, antiunitary = structure.with_reversed()
    grey = bool(passes[n])
    if grey:  # a direct product with time reversal: only the unitary part needs a search
        rotations, translations, antiunitary = rotations[:n], translations[:n], antiunitary[:n]
    table, _ = multiplication_table(rotations, translations, antiunitary)
    n_searched = len(table)
    members = largest_closed_subset(table, passes[:n_searched], bad[:n_searched])
    unitary = members[members < n]
    number, symbol = name_group(rotations[unitary], translations[unitary], structure.cell)
    listed = np.append(members, n) if grey else members
    twice = np.concatenate([members, members]) if grey else members
    reversed_too = np.arange(len(twice)) >= len(members) if grey else antiunitary[members]
    magnetic = name_magnetic_group(
        rotations[twice], translations[twice], reversed_too, structure.cell
    )
    dropped = sorted(set(np.flatnonzero(passes).tolist()) - set(listed.tolist()))
    return FoundGroup(
        tuple(listed.tolist()), number, symbol, magnetic, tuple(tests[i].name for i in dropped)
    )
