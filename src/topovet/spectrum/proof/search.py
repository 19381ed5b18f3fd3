"""Branch and bound: boxes are bounded, kept where the bound suffices, and split where not."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.spectrum.descent import Objective
from topovet.spectrum.eigen import map_threads
from topovet.spectrum.proof.block_bound import BoxBounds, bound_boxes
from topovet.spectrum.proof.boxes import Boxes, joined, split, whole
from topovet.spectrum.proof.expansion import SecondOrder
from topovet.spectrum.proof.zone import Region

BATCH = 256
"""Boxes taken up together, those with the least bound first."""

CHUNK_BYTES = 12 * 2**20
"""Matrices of a chunk of boxes that one thread works on."""

DEEPEST = 40
"""Level beyond which a box is not split: 2^-40 of the bounding box of the zone."""


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """What a search leaves.

    Attributes
    ----------
    settled
        Boxes with bounds that suffice.
    open
        Boxes that are too small to be split, or for which no solves were left; their bounds hold.
    attained_ev, k_frac
        Smallest value at a centre (or given at the start), eV, and where.
    n_solves
        Eigenvalue problems.
    exhausted
        Whether the search ended with boxes to be looked at.
    """

    settled: Boxes
    open: Boxes
    attained_ev: float
    k_frac: FloatArray
    n_solves: int
    exhausted: bool


Improve = Callable[[FloatArray], tuple[float, FloatArray, int]]
"""From a k (3,) to a lower value near it, its k, and the solves spent."""


def search(
    expansion: SecondOrder,
    region: Region,
    objective: Objective,
    *,
    attained: tuple[float, FloatArray],
    target: Callable[[float], float],
    worth_while: Callable[[float], bool],
    smallest_frac: Callable[[float], float],
    improve: Improve,
    max_solves: int,
    start: Boxes | None = None,
) -> Found:
    """Bound an objective over a region.

    Parameters
    ----------
    expansion, region
        The Hamiltonian in the region's coordinates.
    objective
        What is bounded from below.
    attained
        Smallest value known, eV, and its k.
    target
        From the smallest value attained so far to the bound asked for in each box, eV.
    worth_while
        From the same value to whether to go on: there is no use where the bound asked for is above
        it.
    smallest_frac
        From the same value to the reach in fractional k below which boxes are left open.
    improve
        Called when a centre has a lower value than any before.
    max_solves
        Eigenvalue problems; the last batch may exceed it.
    start
        Boxes to begin with, such as those that an earlier search left open; the whole region if
        None.
    """
    value, k_frac = attained
    waiting = whole(expansion.n_axes) if start is None else start
    settled, left = [waiting.only(np.zeros(len(waiting), dtype=bool))], list[Boxes]()
    remainders = Remainders(expansion)
    n_solves = 0
    while len(waiting) and n_solves < max_solves and worth_while(value):
        order = np.argsort(waiting.lower, kind="stable")
        batch, waiting = waiting.only(order[:BATCH]), waiting.only(order[BATCH:])
        bounds = bound_batch(expansion, objective, batch, remainders)
        n_solves += len(batch)
        best = int(bounds.values.argmin())
        if bounds.values[best] < value:
            value = float(bounds.values[best])
            k_frac = region.origin + batch.centres[best] @ region.axes
            lower_value, lower_k, spent = improve(k_frac)
            n_solves += spent
            if lower_value < value:
                value, k_frac = lower_value, lower_k
        batch = Boxes(batch.levels, batch.indices, np.maximum(batch.lower, bounds.lower))
        wanted = target(value)
        done = batch.lower >= wanted
        settled.append(batch.only(done))
        open_, losses = batch.only(~done), bounds.losses[~done]
        affordable = bounds.values[~done] - wanted
        reach = open_.half_widths @ np.abs(region.axes)
        tiny = (reach.max(axis=1) <= smallest_frac(value)) | (open_.levels.max(axis=1) >= DEEPEST)
        left.append(open_.only(tiny))
        parts = split(open_.only(~tiny), losses[~tiny], affordable[~tiny])
        waiting = joined([waiting, parts.only(region.may_hold(parts))])
    return Found(
        joined(settled), joined([*left, waiting]), value, k_frac, n_solves, len(waiting) > 0
    )


class Remainders:
    """`Expansion.remainder_ev` for each shape of box, computed once."""

    def __init__(self, expansion: SecondOrder) -> None:
        self._expansion, self._known = expansion, dict[bytes, float]()

    def of(self, levels: IntArray) -> FloatArray:
        shapes, which = np.unique(levels, axis=0, return_inverse=True)
        values = [self._one(shape) for shape in shapes]
        return np.array(values)[which.reshape(-1)]

    def _one(self, level: IntArray) -> float:
        key = level.tobytes()
        if key not in self._known:
            self._known[key] = self._expansion.remainder_ev(
                np.asarray(0.5 ** (level + 1.0), dtype=np.float64)
            )
        return self._known[key]


def bound_batch(
    expansion: SecondOrder, objective: Objective, boxes: Boxes, remainders: Remainders
) -> BoxBounds:
    """`bound_boxes` for many boxes, over threads."""
    rho = remainders.of(boxes.levels)
    centres, half_widths = boxes.centres, boxes.half_widths
    n_orb = expansion.n_orb
    step = int(np.clip(CHUNK_BYTES // (16 * n_orb**2 * 40), 1, 64))
    parts = map_threads(
        lambda part: bound_boxes(expansion, objective, centres[part], half_widths[part], rho[part]),
        [slice(i, i + step) for i in range(0, len(boxes), step)],
    )
    return BoxBounds(
        np.concatenate([part.values for part in parts]),
        np.concatenate([part.lower for part in parts]),
        np.concatenate([part.losses for part in parts]),
    )
