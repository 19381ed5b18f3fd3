"""Layer groups: space-group operations of a layer, whose cell does not repeat along its normal.

A case in two dimensions comes in a cell with vacuum, and a search for its space group takes the
vacuum for a lattice vector. Of what is found the layer has the operations that keep its plane and
its middle: along the normal x' = x, or x' = 2 m - x with m the middle of the matter. Written with
that, all products have no translation along the normal, and nothing else of a space group's
machinery changes, but that

- momenta are those of the plane, for H does not depend on the third component;
- a site is in the middle or anywhere along the normal: what a cell repeats half a vacuum away is
  no place of the layer.

References
----------
International Tables for Crystallography, volume E (2010): the 80 layer groups.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.model.crystal import Crystal
from topovet.symmetry.bandreps.double_group import build_double_group
from topovet.symmetry.bandreps.strata import Stratum
from topovet.symmetry.operators import SITE_TOLERANCE_ANG
from topovet.symmetry.spacegroup import name_layer_group


@dataclass(frozen=True, slots=True)
class Layer:
    """Where a layer lies in its cell.

    Attributes
    ----------
    axis
        Which of the three lattice vectors leads out of it.
    middle
        Fractional coordinate along that vector of the middle between its outermost atoms.
    """

    axis: int
    middle: float

    @property
    def in_plane(self) -> IntArray:
        """(3, 2) unit vectors of the other two coordinates."""
        return np.delete(np.eye(3, dtype=np.int64), self.axis, axis=1)

    @property
    def periodic(self) -> tuple[bool, bool, bool]:
        """Which directions are periodic."""
        return (self.axis != 0, self.axis != 1, self.axis != 2)


def find_layer(crystal: Crystal) -> Layer | None:
    """The layer of a crystal that is periodic in two directions; None for any other.

    The widest gap between atoms along the third direction, images of the cell included, is taken
    for the vacuum.
    """
    if crystal.dimension != 2:
        return None
    axis = crystal.periodic.index(False)
    heights = np.unique(np.round(crystal.positions_frac[:, axis] % 1.0, 9))
    if not len(heights):
        return Layer(axis, 0.0)
    gaps = np.diff(heights, append=heights[0] + 1.0)
    below = int(gaps.argmax())
    lowest = heights[(below + 1) % len(heights)]
    return Layer(axis, float((lowest + (1.0 - gaps[below]) / 2) % 1.0))


def keeps_layer(
    layer: Layer, rotations: IntArray, translations: FloatArray, cell: FloatArray
) -> BoolArray:
    """(n,) which operations take the plane of a layer, and its middle, onto themselves."""
    axis, others = layer.axis, np.delete(np.arange(3), layer.axis)
    turned = rotations[:, axis][:, others].any(axis=1) | leans(layer, rotations)
    normal = np.cross(*cell[others])
    height = abs(float(cell[axis] @ normal)) / float(np.linalg.norm(normal))
    off = translations[:, axis] - _shift_along(layer, rotations)
    return np.asarray(~turned & (np.abs(off - np.round(off)) * height < SITE_TOLERANCE_ANG))


def leans(layer: Layer, rotations: IntArray) -> BoolArray:
    """(n,) which operations keep the plane, but not the direction of the vector out of it."""
    others = np.delete(np.arange(3), layer.axis)
    keeps_plane = ~rotations[:, layer.axis][:, others].any(axis=1)
    return np.asarray(keeps_plane & rotations[:, others, layer.axis].any(axis=1))


def exact_translations(layer: Layer, rotations: IntArray, translations: FloatArray) -> FloatArray:
    """(n, 3) translations with the component out of the plane that keeps the middle in place."""
    exact = np.array(translations, dtype=float)
    exact[:, layer.axis] = _shift_along(layer, rotations)
    return exact


def _shift_along(layer: Layer, rotations: IntArray) -> FloatArray:
    """(n,) w = (1 - W) m along the normal."""
    return np.asarray((1 - rotations[:, layer.axis, layer.axis]) * layer.middle)


def strata_of_layer(strata: Sequence[Stratum], layer: Layer) -> tuple[Stratum, ...]:
    """Positions of a cell without those half a vacuum away from the middle.

    Coordinates are counted from the middle. Each position left out repeats one that stays.
    """
    return tuple(s for s in strata if s.directions[layer.axis].any() or not s.point[layer.axis])


def name_of_layer(
    layer: Layer, cell: FloatArray, rotations: IntArray, translations: FloatArray
) -> tuple[int, str]:
    """Number and symbol of the layer group of some operations, e.g. (72, "p-3m1").

    Raises
    ------
    NotAGroupError
        The operations are no group.
    """
    exact = exact_translations(layer, rotations, translations)
    group = build_double_group(cell, rotations, exact, spinful=False, time_reversal=False)
    return name_layer_group(group.operations.cell, group.rotations, group.translations, layer.axis)
