"""Hamiltonians of the first-principles cases with the operators of their structure's group."""

from __future__ import annotations

import functools
from dataclasses import dataclass

import numpy as np

from real_cases import run_of
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.model.hamiltonian import TightBindingModel
from topovet.symmetry.operators import WannierOperator, build_operator, with_time_reversal
from topovet.symmetry.results import SpaceGroup


@dataclass(frozen=True, slots=True, eq=False)
class OperatedCase:
    """A case as read, its space group and the grey group of operators on its basis."""

    crystal: Crystal
    basis: OrbitalBasis
    model: TightBindingModel
    bloch: BlochSum
    filling: int
    space_group: SpaceGroup
    operators: tuple[WannierOperator, ...]


@functools.cache
def operated(case: str) -> OperatedCase:
    run = run_of(case)
    based = run.result("hamiltonian-with-basis")
    declarations, group = run.result("declarations"), run.result("space-group")
    basis, crystal = based.basis, declarations.crystal
    return OperatedCase(
        crystal=crystal,
        basis=basis,
        model=based.lattice.model,
        bloch=based.lattice.bloch,
        filling=declarations.settings.filling,
        space_group=group,
        operators=grey_operators(basis, crystal, group),
    )


def grey_operators(
    basis: OrbitalBasis, crystal: Crystal, group: SpaceGroup
) -> tuple[WannierOperator, ...]:
    """Every operation of the structure, then each with time reversal."""
    unitary = [
        build_operator(basis, crystal, w, t)
        for w, t in zip(group.rotations, group.translations, strict=True)
    ]
    return (*unitary, *(with_time_reversal(o, basis) for o in unitary))


def shifted_onsite(model: TightBindingModel, shifts_ev: np.ndarray) -> TightBindingModel:
    """The model with energies (n_orb,) added on the diagonal of H(0)."""
    h_r = np.array(model.h_r)
    home = int(np.flatnonzero(np.all(model.r_cells == 0, axis=1))[0])
    h_r[home] += np.diag(shifts_ev)
    return TightBindingModel(model.r_cells, h_r, model.spinful)
