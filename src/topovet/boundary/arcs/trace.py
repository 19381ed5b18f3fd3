"""A Fermi arc followed through the surface zone, from the projection of a node to another.

An arc is E_s(k_par) = E. From a point on it the next one is guessed ahead, and moved across by
Newton's step until the level there has the energy again. Inside the circle around a projection the
window closes as the node is approached: the rest of the way is taken straight.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.boundary.arcs.loop import SAME_ENERGY_EV, ArcEnd
from topovet.boundary.arcs.projections import (
    NEIGHBOURS,
    cartesian,
    fractional,
    shortest_vector,
)
from topovet.boundary.arcs.results import Arc, Projection
from topovet.boundary.cone import windows
from topovet.boundary.layers import LayerStack
from topovet.boundary.levels import surface_levels
from topovet.boundary.recut import Recut

STEP = 0.02
"""Of the shortest reciprocal vector, from point to point."""

ACROSS = 0.4
"""Of a step: how far beside the guess the slope is taken."""

HALVINGS = 3
"""Times that a step is halved where the arc is not found."""

ROOM_EV = 0.08
"""Levels are looked for this near to the energy."""

ON_ARC_EV = 1e-3
"""A level this near to the energy is on the arc."""

SHARPEST = 0.5
"""Cosine of the sharpest turn from step to step."""

MOST_STEPS = 160

ARRIVED = 0.3
"""Of the radius of its circle: nearer to a projection than this an arc has arrived."""


@dataclass(frozen=True, slots=True, eq=False)
class Zone:
    """A surface with its projections, and the radii (1/angstrom) of the circles around them."""

    stack: LayerStack
    cut: Recut
    filling: int
    projections: tuple[Projection, ...]
    radii: Sequence[float]

    def nearest(self, k_ang: FloatArray) -> tuple[int, FloatArray, float]:
        """The projection nearest to a point, the image of it there, and its distance."""
        k_par = fractional(self.cut, k_ang)
        places = np.array([p.k_par for p in self.projections])
        places = places + np.round(k_par - places)
        images = cartesian(self.cut, places[:, None] + NEIGHBOURS)
        away = np.linalg.norm(images - k_ang, axis=-1)
        number, image = np.unravel_index(int(away.argmin()), away.shape)
        return int(number), images[number, image], float(away[number, image])

    def levels(self, k_ang: FloatArray, energy_ev: float, side: int) -> FloatArray:
        """(n,) the level nearest to the energy at each point; NaN where there is none."""
        k_par = fractional(self.cut, k_ang)
        low, high = windows(self.stack, k_par, self.filling)
        low, high = np.maximum(low, energy_ev - ROOM_EV), np.minimum(high, energy_ev + ROOM_EV)
        found = [x.of(side) for x in surface_levels(self.stack, k_par, low, high, sides=(side,))]
        nearest = [e[np.abs(e - energy_ev).argmin()] if len(e) else np.nan for e in found]
        return np.array(nearest, dtype=float)


def trace_arc(zone: Zone, start: int, end: ArcEnd) -> Arc:
    """Follow an arc outwards from a circle.

    Parameters
    ----------
    zone
        The surface.
    start
        Position of the projection.
    end
        Where the arc passes its circle.
    """
    energy = zone.projections[start].energy_ev
    at = cartesian(zone.cut, np.array(end.k_par))
    centre = cartesian(zone.cut, np.array(zone.projections[start].k_par))
    ahead = (at - centre) / np.linalg.norm(at - centre)
    path, step = [centre, at], STEP * shortest_vector(zone.cut)
    arrived: tuple[int, FloatArray] | None = None
    for _ in range(MOST_STEPS):
        found = _next_point(zone, energy, end.side, at, ahead, step)
        number, image, away = zone.nearest(at if found is None else found)
        left = len(path) > 3 or number != start
        if left and away < (zone.radii[number] if found is None else ARRIVED * zone.radii[number]):
            path += [image] if found is None else [found, image]
            arrived = number, image
            break
        if found is None:
            break
        ahead = (found - at) / np.linalg.norm(found - at)
        at = found
        path.append(at)
    return _arc(zone, start, end.side, energy, np.array(path), arrived)


def _next_point(
    zone: Zone, energy: float, side: int, at: FloatArray, ahead: FloatArray, step: float
) -> FloatArray | None:
    """The next point of the arc, None where there is none within the reach of a step."""
    across = np.array([-ahead[1], ahead[0]])
    for _ in range(1 + HALVINGS):
        guess, beside = at + step * ahead, ACROSS * step * across
        below, here, above = zone.levels(
            np.stack([guess - beside, guess, guess + beside]), energy, side
        )
        slope = (above - below) / (2 * ACROSS * step)
        for _ in range(3):
            if not np.isfinite(here) or not np.isfinite(slope) or slope == 0:
                break
            if abs(here - energy) < ON_ARC_EV:
                moved = (guess - at) / np.linalg.norm(guess - at)
                if moved @ ahead > SHARPEST:
                    return guess
                break
            guess = guess + np.clip((energy - here) / slope, -step, step) * across
            here = zone.levels(guess[None], energy, side)[0]
        step = step / 2
    return None


def _arc(
    zone: Zone,
    start: int,
    side: int,
    energy: float,
    path: FloatArray,
    arrived: tuple[int, FloatArray] | None,
) -> Arc:
    k_par = fractional(zone.cut, path)
    if arrived is None:
        where = ", ".join(f"{c:.3f}" for c in k_par[-1])
        why = f"lost at k = ({where}) of the surface zone, among bulk states or in a sharp turn"
        return Arc(side, start, None, energy, k_par, None, why)
    other = zone.projections[arrived[0]]
    apart = max(abs(e - energy) for e in (other.energy_min_ev, other.energy_max_ev))
    length: float | None = float(np.linalg.norm(np.diff(path, axis=0), axis=1).sum())
    why = ""
    if apart > SAME_ENERGY_EV:
        length = None
        why = (
            f"the nodes at its ends differ in energy by {1e3 * apart:.3g} meV: it ends in a pocket"
        )
    return Arc(side, start, arrived[0], energy, k_par, length, why)
