"""A lattice model as the diagnosis sees a case."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import ArrayLike

from lattice_models import LatticeModel
from topovet.diagnosis.subject import Subject
from topovet.model.assemble import LatticeHamiltonian
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel
from topovet.symmetry.inversion import build_inversion, measure_inversion
from topovet.symmetry.results import InversionOperator
from topovet.symmetry.time_reversal import measure_time_reversal

PAULI_Z = np.diag([1.0, -1.0])


def lattice_of(model: LatticeModel | TightBindingModel) -> LatticeHamiltonian:
    built = model.tight_binding() if isinstance(model, LatticeModel) else model
    return LatticeHamiltonian(built, build_bloch_sum(built))


def inversion_of(model: LatticeModel) -> InversionOperator:
    return build_inversion(model.basis, model.crystal, np.array(model.centre))


def subject_of(
    model: LatticeModel,
    *,
    filling: int | None = None,
    operator: InversionOperator | None = None,
    lattice: LatticeHamiltonian | None = None,
) -> Subject:
    """The model with inversion as declared, or as given, and its symmetries measured."""
    lattice = lattice_of(model) if lattice is None else lattice
    operator = inversion_of(model) if operator is None else operator
    periodic = model.crystal.periodic
    return Subject(
        lattice=lattice,
        crystal=model.crystal,
        filling=model.filling if filling is None else filling,
        operator=operator,
        time_reversal=measure_time_reversal(lattice.model, lattice.bloch, periodic),
        inversion=measure_inversion(lattice.model, lattice.bloch, operator, periodic),
    )


def with_onsite(model: LatticeModel, block: ArrayLike) -> LatticeModel:
    """H(0) += block, eV."""
    h_r = model.h_r.astype(complex)
    h_r[~model.r_cells.any(axis=1)] += np.asarray(block)
    return replace(model, h_r=h_r)
