"""Lattice models with the operators of their own group, for tests on mirrors and indicators."""

from __future__ import annotations

import functools
from dataclasses import dataclass

import numpy as np

from lattice_models import LatticeModel
from topovet.invariants.mirror_witness import (
    Mirror,
    MirrorWitness,
    compute_mirror_witness,
    proper_mirrors,
)
from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.symmetry.hopping import real_space_residual_mev
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import WannierOperator
from topovet.symmetry.spacegroup import find_space_group


@dataclass(frozen=True, slots=True, eq=False)
class GroupedModel:
    """A model, its Fourier sum, and the operations of its structure that H has exactly."""

    model: LatticeModel
    bloch: BlochSum
    operators: tuple[WannierOperator, ...]

    def mirrors(self) -> list[Mirror]:
        reflections = [
            (o, 0.0)
            for o in self.operators
            if np.trace(o.rotation) == 1 and round(float(np.linalg.det(o.rotation))) == -1
        ]
        return proper_mirrors(reflections, self.model.crystal)[0]

    def mirror_witness(self, *, by_symmetry: bool = True) -> MirrorWitness:
        return compute_mirror_witness(
            self.bloch,
            self.mirrors(),
            self.operators if by_symmetry else (),
            self.model.crystal,
            self.model.filling,
        )


@functools.lru_cache(maxsize=8)
def grouped(model: LatticeModel) -> GroupedModel:
    tight_binding, group = model.tight_binding(), find_space_group(model.crystal)
    built = build_operators(model.basis, model.crystal, group.rotations, group.translations)
    kept = tuple(o for o in built.operators if real_space_residual_mev(tight_binding, o) < 1e-6)
    return GroupedModel(model, build_bloch_sum(tight_binding), kept)
