"""Edge levels at one energy in the gap of a two-dimensional crystal, all through the edge zone."""

from __future__ import annotations

import numpy as np

from topovet.arrays import FloatArray
from topovet.boundary.cone import EDGE_MARGIN_EV
from topovet.boundary.cone_results import EdgeCrossing
from topovet.boundary.evanescent import decay_length
from topovet.boundary.layers import LayerStack
from topovet.boundary.levels import Levels, surface_levels
from topovet.boundary.recut import Recut

ZONE_POINTS = 64
"""Points along the edge zone."""

BESIDE = 2e-3
"""Of the zone: how far beside a crossing its slope is taken."""

FARTHEST_EV = 0.15
"""A level moves by no more than this from point to point."""

CLOSE_EV = 0.06
"""Beside a crossing its level is looked for this near to the energy; with two it is left out."""

WIDEST_EV = 0.12
"""Levels are looked for this near to the energy, or as near as the bulk."""


def edge_crossings(
    stack: LayerStack,
    cut: Recut,
    vbm_ev: float,
    cbm_ev: float,
    energy_ev: float,
    *,
    half_zone: bool,
) -> tuple[EdgeCrossing, ...]:
    """Levels of both edges that have an energy in the gap, with their velocities.

    Parameters
    ----------
    stack, cut
        The crystal by rows, and their cell.
    vbm_ev, cbm_ev
        Edges of the bulk bands, with a gap between them.
    energy_ev
        Between them.
    half_zone
        Whether to look between 0 and 1/2 only: time reversal gives the rest.
    """
    low = max(vbm_ev + EDGE_MARGIN_EV, energy_ev - WIDEST_EV)
    high = min(cbm_ev - EDGE_MARGIN_EV, energy_ev + WIDEST_EV)
    n = ZONE_POINTS // 2 if half_zone else ZONE_POINTS
    # in the whole zone half a step off the momenta where levels are degenerate
    k = (np.arange(n + 1) + (0.0 if half_zone else 0.5)) / ZONE_POINTS
    found = _levels(stack, k, low, high)
    near = [
        (side, k[i] + share * (k[i + 1] - k[i]))
        for i in range(n)
        for side in (0, 1)
        for share in _passed(found[i].of(side), found[i + 1].of(side), energy_ev)
    ]
    if not near:
        return ()
    centres = np.array([at for _, at in near])
    both = _levels(stack, np.concatenate([centres - BESIDE, centres + BESIDE]), low, high)
    length = float(2 * BESIDE * np.abs(cut.reciprocal[0, 0]))
    crossings = []
    for i, (side, centre) in enumerate(near):
        before, after = (both[i + shift].of(side) for shift in (0, len(near)))
        ends = [e[np.abs(e - energy_ev) < CLOSE_EV] for e in (before, after)]
        if any(len(e) != 1 for e in ends):
            continue
        a, b = (float(e[0]) for e in ends)
        at = centre + (energy_ev - (a + b) / 2) / (b - a) * 2 * BESIDE if b != a else centre
        decay = decay_length(stack, cut, np.array([at, 0.0]), energy_ev)
        crossings.append(EdgeCrossing(side, float(at % 1.0), energy_ev, (b - a) / length, decay))
    return tuple(crossings)


def _levels(stack: LayerStack, k: FloatArray, low: float, high: float) -> list[Levels]:
    along = np.stack([k, 0 * k], axis=1)
    return surface_levels(stack, along, np.full(len(k), low), np.full(len(k), high))


def _passed(before: FloatArray, after: FloatArray, energy: float) -> list[float]:
    """Shares of the step at which levels pass the energy; each is followed to the nearest."""
    found = []
    for e in before:
        if not len(after):
            break
        f = after[np.abs(after - e).argmin()]
        back = before[np.abs(before - f).argmin()]
        if back == e and abs(f - e) < FARTHEST_EV and (e < energy) != (f < energy):
            found.append(float((energy - e) / (f - e)))
    return found
