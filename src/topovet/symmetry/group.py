"""The Hamiltonian's own symmetry group, found by testing and set beside that of its structure.

Every operation of the structure is tested (`symmetry.operation_test`), then time reversal, and,
where that is broken, its product with each of them. What holds must form a group; it can be smaller
than the structure's (strain, magnetism, broken Wannier functions) or larger (a structure file less
symmetric than the Hamiltonian), for which operations are tried that the structure nearly has.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.model.hamiltonian import TightBindingModel
from topovet.symmetry.group_results import FoundGroup, GroupTest, OperationTest
from topovet.symmetry.operation_test import (
    BANDS_MEV,
    HOLDS_MEV,
    Probe,
    measure_operation,
    prepare_probe,
    quick_violation_mev,
    untested,
)
from topovet.symmetry.operations import (
    largest_closed_subset,
    multiplication_table,
    name_operation,
    same_operation,
)
from topovet.symmetry.operator_set import OperatorSet, build_operators
from topovet.symmetry.operators import (
    SITE_TOLERANCE_ANG,
    NotClosedError,
    WannierOperator,
    factor_system,
    with_time_reversal,
)
from topovet.symmetry.results import SpaceGroup
from topovet.symmetry.spacegroup import find_candidate_operations, name_group, name_magnetic_group

LOOSE_ANG = (0.1, 0.3)
"""How far atoms may be from where an operation of the Hamiltonian wants them: a coordinate with a
wrong digit, or a structure taken from before a relaxation."""


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
    """
    probe = prepare_probe(model, bloch, unshifted_bloch, crystal.periodic, mp_grid, filling)
    structure = _Operations(crystal.cell, space_group.rotations, space_group.translations)
    tests, operators = _test_structure(probe, structure, basis, crystal)
    holds = np.array([test.holds for test in tests])
    own = _found_group(structure, tests, holds)
    in_bands = None
    if filling is not None:
        passes = np.array([bool(test.in_bands) for test in tests])
        in_bands = _found_group(structure, tests, passes)
    beyond = _beyond_structure(probe, structure, holds, basis, crystal)
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


@dataclass(frozen=True, slots=True, eq=False)
class _Operations:
    """A group of unitary operations, and their products with time reversal behind them.

    The latter are ordered as in `GroupTest.tests`: Theta itself, then the others.
    """

    cell: FloatArray
    rotations: IntArray
    translations: FloatArray

    @property
    def n(self) -> int:
        return len(self.rotations)

    def name(self, i: int, *, antiunitary: bool = False) -> str:
        w, t = self.rotations[i], self.translations[i]
        return name_operation(w, t, self.cell, antiunitary=antiunitary)

    def has_near(self, operator: WannierOperator, reach_ang: float) -> BoolArray:
        """(n,) which of them equal another operation but for a small shift of the origin."""
        apart = self.translations - operator.translation
        near = np.linalg.norm((apart - np.round(apart)) @ self.cell, axis=1) < reach_ang
        return np.asarray(near & np.all(self.rotations == operator.rotation, axis=(1, 2)))

    @property
    def reversed_order(self) -> list[int]:
        """Unitary part of each product with time reversal, the identity first."""
        neutral = np.flatnonzero(
            same_operation(
                np.eye(3, dtype=np.int64), np.zeros(3), self.rotations, self.translations
            )
        )
        return [*neutral.tolist(), *(i for i in range(self.n) if i not in neutral)]

    def with_reversed(self) -> tuple[IntArray, FloatArray, BoolArray]:
        """Rotations, translations and antiunitarity of all of them."""
        order = [*range(self.n), *self.reversed_order]
        antiunitary = np.arange(2 * self.n) >= self.n
        return self.rotations[order], self.translations[order], antiunitary


def _test_structure(
    probe: Probe, structure: _Operations, basis: OrbitalBasis, crystal: Crystal
) -> tuple[list[OperationTest], dict[int, WannierOperator]]:
    """Tests in the order of `GroupTest.tests`, and the operators of those that have one."""
    built = build_operators(basis, crystal, structure.rotations, structure.translations)
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
    return tests, at


def _test_reversed(
    probe: Probe,
    structure: _Operations,
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
    structure: _Operations, i: int, reason: str, *, antiunitary: bool = False
) -> OperationTest:
    return untested(
        structure.name(i, antiunitary=antiunitary),
        structure.rotations[i],
        structure.translations[i],
        reason,
        antiunitary=antiunitary,
    )


def _found_group(
    structure: _Operations, tests: list[OperationTest], passes: BoolArray
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


@dataclass(frozen=True, slots=True, eq=False)
class _Beyond:
    tests: tuple[OperationTest, ...]
    number: int
    symbol: str
    n_candidates: int


def _beyond_structure(
    probe: Probe, structure: _Operations, holds: BoolArray, basis: OrbitalBasis, crystal: Crystal
) -> _Beyond:
    """Operations of a slightly moved structure, or one of one kind of atoms, that H has.

    Of the groups so found the largest is told.
    """
    best, size, n_candidates = _Beyond((), 0, "", 0), int(holds[: structure.n].sum()), 0
    for symprec in LOOSE_ANG:
        for one_kind in (False, True):
            rotations, translations = find_candidate_operations(crystal, symprec, one_kind=one_kind)
            if len(rotations) <= structure.n:
                continue
            candidates = _Operations(crystal.cell, rotations, translations)
            new, passes = _test_candidates(
                probe, candidates, structure, holds, basis, crystal, symprec
            )
            n_candidates = max(n_candidates, len(rotations) - structure.n)
            table, _ = multiplication_table(rotations, translations, np.zeros(len(rotations), bool))
            members = largest_closed_subset(table, passes, np.zeros(len(rotations)))
            if len(members) > size:
                size = len(members)
                name = name_group(
                    rotations[members], translations[members], crystal.cell, symprec=symprec
                )
                found = tuple(new[i] for i in members.tolist() if i in new)
                best = _Beyond(found, *name, 0)
    return _Beyond(best.tests, best.number, best.symbol, n_candidates)


def _test_candidates(
    probe: Probe,
    candidates: _Operations,
    structure: _Operations,
    holds: BoolArray,
    basis: OrbitalBasis,
    crystal: Crystal,
    symprec: float,
) -> tuple[dict[int, OperationTest], BoolArray]:
    """Tests of candidates that hold and are not the structure's; which candidates hold at all."""
    reach = symprec + SITE_TOLERANCE_ANG
    built = build_operators(
        basis, crystal, candidates.rotations, candidates.translations, site_tolerance_ang=reach
    )
    new, passes = {}, np.zeros(candidates.n, dtype=bool)
    for i, operator in zip(built.indices.tolist(), built.operators, strict=True):
        known = structure.has_near(operator, 2 * reach)
        if known.any():
            passes[i] = holds[: structure.n][known].any()
        elif quick_violation_mev(probe, operator) <= HOLDS_MEV:
            test = measure_operation(probe, operator, candidates.name(i))
            passes[i] = test.holds
            if test.holds:
                new[i] = test
    return new, passes
