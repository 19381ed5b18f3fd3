"""Stacks of dyadic boxes in [0, 1]^d: exact in floating point, halved along one axis at a time."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, FloatArray, IntArray

MOST_HALVINGS = 3
"""A box is halved at most so often before its parts are looked at: along every axis once."""

LOSS_FACTORS = np.array([1 / 2, 1 / 4, 1 / 6])
"""What halving an axis leaves of its share of first order, second order and remainder, roughly."""


@dataclass(frozen=True, slots=True, eq=False)
class Boxes:
    """Boxes [i 2^-l, (i + 1) 2^-l] with l, i of `levels`, `indices` (n, d), and what is known.

    Attributes
    ----------
    lower
        (n,) bound inherited from the box they are part of, eV.
    """

    levels: IntArray
    indices: IntArray
    lower: FloatArray

    def __len__(self) -> int:
        return len(self.levels)

    @property
    def half_widths(self) -> FloatArray:
        return np.asarray(0.5 ** (self.levels + 1.0))

    @property
    def centres(self) -> FloatArray:
        return np.asarray((2 * self.indices + 1) * self.half_widths)

    def only(self, chosen: BoolArray | IntArray) -> Boxes:
        return Boxes(self.levels[chosen], self.indices[chosen], self.lower[chosen])


def whole(n_axes: int) -> Boxes:
    """The unit box."""
    zeros = np.zeros((1, n_axes), dtype=np.int64)
    return Boxes(zeros, zeros, np.array([-np.inf]))


def joined(stacks: list[Boxes]) -> Boxes:
    return Boxes(
        np.concatenate([b.levels for b in stacks]),
        np.concatenate([b.indices for b in stacks]),
        np.concatenate([b.lower for b in stacks]),
    )


def split(boxes: Boxes, losses: FloatArray, affordable: FloatArray) -> Boxes:
    """Halve each box along its loosest axis, and again while that is foreseen to be too little.

    Parameters
    ----------
    boxes
        n boxes.
    losses
        (n, 3, d) from `BoxBounds`.
    affordable
        (n,) loss that the parts may have.
    """
    finished: list[Boxes] = []
    for halving in range(MOST_HALVINGS):
        if halving > 0:
            enough = losses.sum(axis=(1, 2)) <= affordable
            finished.append(boxes.only(enough))
            boxes, losses, affordable = boxes.only(~enough), losses[~enough], affordable[~enough]
        if len(boxes) == 0:
            break
        axis = losses.sum(axis=1).argmax(axis=1)
        rows = np.arange(len(boxes))
        losses = losses.copy()
        losses[rows, :, axis] *= LOSS_FACTORS
        boxes = _halved(boxes, axis)
        losses, affordable = np.concatenate([losses, losses]), np.tile(affordable, 2)
    return joined([*finished, boxes])


def _halved(boxes: Boxes, axis: IntArray) -> Boxes:
    rows = np.arange(len(boxes))
    levels, left = boxes.levels.copy(), boxes.indices.copy()
    levels[rows, axis] += 1
    left[rows, axis] *= 2
    right = left.copy()
    right[rows, axis] += 1
    return Boxes(
        np.concatenate([levels, levels]),
        np.concatenate([left, right]),
        np.concatenate([boxes.lower, boxes.lower]),
    )
