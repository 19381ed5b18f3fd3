"""A group with the values of its indicators, and the arrangements of layers that fit them."""

from __future__ import annotations

import functools
import itertools
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.invariants.band_reps.allowed_operations import ProtectingOperation, list_operations
from topovet.invariants.band_reps.allowed_results import (
    IndicatorValues,
)
from topovet.invariants.band_reps.mirror_layers import (
    GroupMirror,
    find_group_mirrors,
)
from topovet.symmetry.layer_parity import LayerParities, find_layer_parities


@dataclass(frozen=True, slots=True, eq=False)
class AllowedGroup:
    """A group with all that does not depend on indicators.

    `operations` are those of `list_operations`, without and with a point that is named.
    """

    cell: FloatArray
    rotations: IntArray
    translations: FloatArray
    mirrors: tuple[GroupMirror, ...]
    everything: LayerParities
    operations: tuple[tuple[ProtectingOperation, ...], tuple[ProtectingOperation, ...]]


@functools.lru_cache(maxsize=16)  # one group is asked for with and without counted numbers
def group_of(cell: bytes, rotations: bytes, translations: bytes) -> AllowedGroup:
    lattice = np.frombuffer(cell).reshape(3, 3)
    w = np.frombuffer(rotations, dtype=np.int64).reshape(-1, 3, 3)
    t = np.frombuffer(translations).reshape(-1, 3)
    return AllowedGroup(
        cell=lattice,
        rotations=w,
        translations=t,
        mirrors=find_group_mirrors(lattice, w, t),
        everything=find_layer_parities(w, t),
        operations=(
            list_operations(lattice, w, t, say_where=False),
            list_operations(lattice, w, t, say_where=True),
        ),
    )


@dataclass(frozen=True, slots=True, eq=False)
class IndicatedGroup:
    """A group with its indicator values.

    `choices` are the delta that fit nu0 = 0, the weak indices and kappa; all of the group's where
    nu0 is not 0.
    """

    group: AllowedGroup
    values: IndicatorValues
    choices: LayerParities

    @property
    def layered(self) -> bool:
        """Whether layers say anything: nu0 = 0."""
        return self.values.strong == 0

    @property
    def weak(self) -> IntArray:
        """(n, 3) weak indices that are left."""
        if self.values.weak is not None:
            return np.array([self.values.weak])
        if self.layered:
            return np.unique(self.choices.weak, axis=0)
        every = np.array(list(itertools.product((0, 1), repeat=3)))
        turned = (every @ self.group.rotations) % 2
        return np.asarray(every[np.all(turned == every, axis=(0, 2))])
