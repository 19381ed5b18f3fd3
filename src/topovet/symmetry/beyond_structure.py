"""Operations that the Hamiltonian has and its structure file lacks."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.symmetry.group_results import OperationTest
from topovet.symmetry.operation_test import (
    HOLDS_MEV,
    Probe,
    measure_operation,
    quick_violation_mev,
)
from topovet.symmetry.operations import (
    OperationGroup,
    largest_closed_subset,
    multiplication_table,
)
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import SITE_TOLERANCE_ANG
from topovet.symmetry.spacegroup import find_candidate_operations, name_group

LOOSE_ANG = (0.1, 0.3)
"""How far atoms may be from where an operation of the Hamiltonian wants them: a coordinate with a
wrong digit, or a structure taken from before a relaxation."""


@dataclass(frozen=True, slots=True, eq=False)
class BeyondStructure:
    """What is found beyond the structure, as in `GroupTest`."""

    tests: tuple[OperationTest, ...]
    number: int
    symbol: str
    n_candidates: int


def find_beyond_structure(
    probe: Probe, structure: OperationGroup, holds: BoolArray, basis: OrbitalBasis, crystal: Crystal
) -> BeyondStructure:
    """Operations of a slightly moved structure, or one of one kind of atoms, that H has.

    Of the groups so found the largest is told.
    """
    best, size, n_candidates = BeyondStructure((), 0, "", 0), int(holds[: structure.n].sum()), 0
    for symprec in LOOSE_ANG:
        for one_kind in (False, True):
            rotations, translations = find_candidate_operations(crystal, symprec, one_kind=one_kind)
            if len(rotations) <= structure.n:
                continue
            candidates = OperationGroup(crystal.cell, rotations, translations)
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
                best = BeyondStructure(found, *name, 0)
    return BeyondStructure(best.tests, best.number, best.symbol, n_candidates)


def _test_candidates(
    probe: Probe,
    candidates: OperationGroup,
    structure: OperationGroup,
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
        known = structure.has_near(operator.rotation, operator.translation, 2 * reach)
        if known.any():
            passes[i] = holds[: structure.n][known].any()
        elif quick_violation_mev(probe, operator) <= HOLDS_MEV:
            test = measure_operation(probe, operator, candidates.name(i))
            passes[i] = test.holds
            if test.holds:
                new[i] = test
    return new, passes
