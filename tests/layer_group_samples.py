"""The 80 layer groups, taken from settings of space groups without a translation along one axis.

The operations are those of the spglib database. Which layer group they are is asked of spglib, with
a structure of atoms at general positions, not of the code under test.
"""

from __future__ import annotations

import functools
import warnings
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
import spglib

from space_group_samples import primitive_vectors
from topovet.arrays import FloatArray, IntArray
from topovet.symmetry.bandreps.indicator_group import (
    BandRepresentations,
    compute_band_representations,
)
from topovet.symmetry.bandreps.layers import Layer

HEXAGONAL = 194
"""Last space group without cubic axes, none of which is a layer's."""


@dataclass(frozen=True, slots=True, eq=False)
class LayerSample:
    """A layer group in a primitive cell, angstrom and fractional."""

    number: int
    symbol: str
    cell: FloatArray
    rotations: IntArray
    translations: FloatArray
    layer: Layer

    def representations(self, *, spinful: bool) -> BandRepresentations:
        """Its band representations, with time reversal."""
        return compute_band_representations(
            self.cell, self.rotations, self.translations, spinful=spinful, layer=self.layer
        )


@functools.cache
def layer_groups() -> dict[int, LayerSample]:
    """One setting of each layer group that some space group holds, by its number."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)  # spglib's change of error handling
        return {sample.number: sample for sample in _settings()}


def _settings() -> Iterator[LayerSample]:
    seen: set[tuple[int, int]] = set()
    for hall in range(1, 531):
        number = spglib.get_spacegroup_type(hall).number
        if number > HEXAGONAL:
            return
        found = spglib.get_symmetry_from_database(hall)
        rotations = np.array(found["rotations"], dtype=np.int64)
        for axis in range(3):
            fits = _has_layer(rotations, found["translations"], axis)
            if fits and (number, axis) not in seen:
                seen.add((number, axis))
                yield _sample(rotations, np.array(found["translations"]), axis)


def _has_layer(rotations: IntArray, translations: FloatArray, axis: int) -> bool:
    """Whether one plane normal to the axis is kept by all operations."""
    others = [i for i in range(3) if i != axis]
    if rotations[:, axis][:, others].any() or rotations[:, others, axis].any():
        return False
    turns = rotations[:, axis, axis] == -1
    along = translations[:, axis]
    off = np.concatenate([along[~turns], along[turns] - along[turns][:1]])
    return bool(np.abs(off - np.round(off)).max() < 1e-6)


def _sample(rotations: IntArray, translations: FloatArray, axis: int) -> LayerSample:
    metric = np.mean([w.T @ np.diag([21.0, 25.0, 34.0]) @ w for w in rotations], axis=0)
    identity = np.all(rotations == np.eye(3, dtype=np.int64), axis=(1, 2))
    conventional = np.linalg.cholesky(metric)
    rows = primitive_vectors(translations[identity], conventional)
    inverse = np.linalg.inv(rows)
    new_rotations = np.round(inverse.T @ rotations @ rows.T).astype(np.int64)
    new_translations = np.round(translations @ inverse * 24) / 24 % 1.0
    _, first = np.unique(new_rotations.reshape(-1, 9), axis=0, return_index=True)
    kept = np.sort(first)
    new_rotations, new_translations = new_rotations[kept], new_translations[kept]
    new_axis = int(np.flatnonzero(rows[:, axis])[0])
    turns = new_rotations[:, new_axis, new_axis] == -1
    middle = float(new_translations[turns, new_axis][0] / 2) if turns.any() else 0.0
    cell = rows @ conventional
    number, symbol = _name(cell, new_rotations, new_translations, Layer(new_axis, middle))
    return LayerSample(
        number, symbol, cell, new_rotations, new_translations, Layer(new_axis, middle)
    )


def _name(
    cell: FloatArray, rotations: IntArray, translations: FloatArray, layer: Layer
) -> tuple[int, str]:
    """Number and symbol by spglib."""
    positions: list[FloatArray] = []
    kinds: list[int] = []
    for kind, place in enumerate(((0.113, 0.271, 0.031), (0.377, 0.139, 0.071))):
        general = np.insert(place[:2], layer.axis, layer.middle + place[2])
        images = rotations @ general + translations
        positions += list(images % 1.0)
        kinds += [kind + 1] * len(images)
    found = spglib.get_layergroup((cell, positions, kinds), aperiodic_dir=layer.axis, symprec=1e-3)
    assert len(found.rotations) == len(rotations)
    return int(found.number), str(found.international)
