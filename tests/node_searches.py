"""Searches for nodes of models, with the symmetries that the tests know them to have."""

from __future__ import annotations

import numpy as np

from lattice_models import LatticeModel
from proof_models import proven
from topovet.invariants.nodes.points import Case
from topovet.invariants.nodes.results import NodeSearch, Reference
from topovet.invariants.nodes.survey import survey_closings
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel
from topovet.spectrum.proof.prove import ProvenHamiltonian
from topovet.spectrum.proof.symmetry_use import images_of, residual_everywhere
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import with_time_reversal
from topovet.symmetry.spacegroup import find_space_group

ORTHOGONAL = Crystal(np.diag([4.0, 4.0, 5.0]), ("H",), np.zeros((1, 3)))
LEFT_HANDED = Crystal(np.diag([4.0, 4.0, -5.0]), ("H",), np.zeros((1, 3)))
AT_ZERO = Reference(0.0, "given")
BUDGET = 100_000


def bare_search(
    model: TightBindingModel, filling: int, crystal: Crystal = ORTHOGONAL
) -> NodeSearch:
    """Without any symmetry."""
    hamiltonian = proven(model, crystal=crystal)
    case = Case(hamiltonian.bloch, crystal, filling, (), model.spinful, AT_ZERO)
    return survey_closings(hamiltonian, case, np.zeros((1, 3)), max_solves=BUDGET)


def symmetric_search(model: LatticeModel, *, time_reversal: bool = True) -> NodeSearch:
    """With all operations of the structure that the Hamiltonian has."""
    h, crystal = model.tight_binding(), model.crystal
    group = find_space_group(crystal)
    built = build_operators(model.basis, crystal, group.rotations, group.translations)
    unitary = [o for o in built.operators if residual_everywhere(h, o) < 1e-6]
    operators = list(unitary)
    if time_reversal:
        operators += [with_time_reversal(o, model.basis) for o in unitary]
    images = images_of(h, unitary, time_reversal=time_reversal)
    bloch = build_bloch_sum(h)
    case = Case(bloch, crystal, model.filling, operators, model.spinful, AT_ZERO)
    proven_h = ProvenHamiltonian(h, bloch, crystal, images)
    return survey_closings(proven_h, case, np.zeros((1, 3)), max_solves=BUDGET)
