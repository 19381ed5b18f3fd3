"""Where labels go in a crowded drawing: beside their marks, on the side with most room."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray

_SIDES = np.array(
    [(1, 0), (-1, 0), (0, 1), (0, -1), (1, 1), (1, -1), (-1, 1), (-1, -1)], dtype=float
)
_SIDE_COST = np.array([0.0, 0.0, 6.0, 6.0, 8.0, 8.0, 8.0, 8.0])
"""In square points of overlap: level labels read best, corners worst."""


@dataclass(frozen=True, slots=True, eq=False)
class Placement:
    """Centres of the labels (n, 2), points, and the area of all overlaps left, square points."""

    centres: FloatArray
    overlap: float


def place_labels(
    anchors: FloatArray, sizes: FloatArray, obstacles: FloatArray, *, clearance: float
) -> Placement:
    """Greedy placement, in the order given.

    Parameters
    ----------
    anchors
        (n, 2) centres of the marks, points; the drawing's middle is the origin.
    sizes
        (n, 2) width and height of each label, points.
    obstacles
        (m, 4) boxes to keep clear of: x, y of the centre, width, height; marks included.
    clearance
        Distance from the centre of a mark to its label, points.
    """
    boxes = [*obstacles]
    centres = np.zeros_like(anchors)
    total = 0.0
    for i, (anchor, size) in enumerate(zip(anchors, sizes, strict=True)):
        tried = anchor + _SIDES * (size / 2 + clearance)
        diagonal = np.abs(_SIDES).sum(axis=1) == 2
        tried[diagonal] = anchor + _SIDES[diagonal] * (size / 2 + 0.55 * clearance)
        overlaps = np.array([_overlap(centre, size, np.array(boxes)) for centre in tried])
        outward = -2.0 * np.sign(_SIDES @ anchor)
        best = int(np.argmin(np.round(overlaps + _SIDE_COST + outward, 6)))
        centres[i] = tried[best]
        total += float(overlaps[best])
        boxes.append(np.array([*tried[best], *size]))
    return Placement(centres, total)


def _overlap(centre: FloatArray, size: FloatArray, boxes: FloatArray) -> float:
    """Area that a box shares with others, square points."""
    if len(boxes) == 0:
        return 0.0
    shared = (size + boxes[:, 2:]) / 2 - np.abs(boxes[:, :2] - centre)
    shared = np.minimum(np.clip(shared, 0, None), np.minimum(size, boxes[:, 2:]))
    return float((shared[:, 0] * shared[:, 1]).sum())
