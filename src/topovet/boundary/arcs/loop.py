"""Surface levels on a circle around the projection of a node, counted with their signs.

The circle and k along the normal n span a torus on which the bulk gap is open. It is what a tube
around the enclosed nodes closes to, so that the Chern number of its filled bands, outwards, is the
sum of their chiralities (Wan, Turner, Vishwanath, Savrasov 2011). With t counter-clockwise about
n, (t, n) is the outward orientation, and in the orientation of an edge the filled bands of (a'_1,
out, a'_3) give (t, n) with the other sign: the upper half-crystal, matter along +n, has as many
levels that rise along -t as the circle encloses of chirality, net, and the lower half as many along
+t. Both halves, at two curves in the window, are four counts that must agree.

References
----------
Wan, Turner, Vishwanath, Savrasov, PRB 83, 205101 (2011), doi:10.1103/PhysRevB.83.205101
Hatsugai, PRL 71, 3697 (1993), doi:10.1103/PhysRevLett.71.3697
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.boundary.arcs.projections import fractional
from topovet.boundary.arcs.results import LoopCount, Projection
from topovet.boundary.cone import windows
from topovet.boundary.layers import LayerStack
from topovet.boundary.levels import surface_levels
from topovet.boundary.line import Line, LineCriteria, Unfollowed
from topovet.boundary.recut import Recut
from topovet.boundary.results import Crossing
from topovet.boundary.witness import GAMMA_FRACTION, GAMMA_SHARE

RADIUS_SHARES = (0.4, 0.25, 0.12)
"""Radii over the distance to the nearest other projection, tried until the window is open all
around."""

WIDEST = 0.12
"""Of the shortest reciprocal vector: no circle is wider than this."""

OFF_AXIS = 0.071
"""Of a turn: where a circle starts, off the lines on which symmetry would put an arc."""

LOOP_POINTS = 48
"""Points on the circle at which levels at the node's energy are looked for."""

NEAR_EV = 0.12
"""They are looked for this near to that energy; none moves by more from point to point."""

SAME_ENERGY_EV = 5e-3
"""Nodes of one projection whose energies differ by more leave no energy at which arcs end there:
bulk pockets take its place."""


@dataclass(slots=True, kw_only=True)
class Loop(Line):
    """A circle of k_par, t from 0 to 1 once around, counter-clockwise about the normal.

    Attributes
    ----------
    centre
        (2,) fractional.
    axes
        (2, 2) fractional: its radius along the two directions of `surface_frame`.
    """

    centre: FloatArray
    axes: FloatArray

    def k_at(self, t: FloatArray) -> FloatArray:
        """(n, 2) k_par."""
        angle = 2 * np.pi * ((np.asarray(t) + OFF_AXIS) % 1.0)
        along = np.stack([np.cos(angle), np.sin(angle)], axis=-1)
        return np.asarray(self.centre + along @ self.axes)


@dataclass(frozen=True, slots=True)
class ArcEnd:
    """Where a level passes the node's energy on the circle: side, k_par, sign of dE/dt."""

    side: int
    k_par: tuple[float, float]
    sign: int


def count_around(
    stack: LayerStack,
    cut: Recut,
    filling: int,
    number: int,
    projection: Projection,
    criteria: LineCriteria,
    shortest_ang: float,
) -> tuple[LoopCount, tuple[ArcEnd, ...], int]:
    """Levels on circles around a projection, of both half-crystals.

    Parameters
    ----------
    stack, cut, filling
        The crystal by planes, their cell, and the occupied bands.
    number, projection
        Around which, and its position in the list.
    criteria
        When a count is believed.
    shortest_ang
        Shortest reciprocal vector of the surface.

    Returns
    -------
    tuple
        The count, the ends of arcs on the circle, and the half-crystals that were solved.
    """
    widest = WIDEST * shortest_ang
    radii = [min(share * projection.nearest_ang, widest) for share in RADIUS_SHARES]
    n_solves = 0
    for radius in dict.fromkeys(radii):
        loop = _loop(stack, cut, filling, projection, radius, criteria)
        chirality, why = _counted(loop, criteria)
        n_solves += loop.n_solves
        if chirality is not None:
            break
    ends, ends_why = ((), why) if chirality is None else _ends(loop, projection, chirality)
    count = LoopCount(
        projection=number,
        status="unresolved" if chirality is None else "ok",
        reason=why,
        radius_ang=radius,
        chirality=chirality,
        smallest_window_ev=loop.narrowest()[0],
        ends=None if ends_why else _by_side(ends),
        ends_reason=ends_why,
    )
    return count, ends, n_solves


def _loop(
    stack: LayerStack,
    cut: Recut,
    filling: int,
    projection: Projection,
    radius: float,
    criteria: LineCriteria,
) -> Loop:
    centre = np.array(projection.k_par)
    axes = fractional(cut, radius * np.eye(2))
    start = centre + axes[0]
    return Loop(stack, filling, start, start, criteria, centre=centre, axes=axes)


def _counted(loop: Loop, criteria: LineCriteria) -> tuple[int | None, str]:
    """The chirality enclosed, or why it is not settled."""
    try:
        return _enclosed(_crossings(loop, loop.resolve_window(), criteria), criteria)
    except Unfollowed as stopped:
        return None, str(stopped)


def _crossings(loop: Loop, points: list[float], criteria: LineCriteria) -> list[Crossing]:
    """Counts at several curves, until enough are resolved."""
    inverse = np.concatenate(loop.inverse_greens([0.0, 0.5], GAMMA_FRACTION))
    gamma = GAMMA_SHARE * float(np.median(np.abs(np.linalg.eigvalsh(inverse))))
    found: list[Crossing] = []
    for fraction in criteria.fractions:
        found += loop.follow(points, fraction, gamma)
        if sum(c.net is not None for c in found) >= 2 * criteria.curves:
            break
    return found


def _enclosed(crossings: list[Crossing], criteria: LineCriteria) -> tuple[int | None, str]:
    """The chirality that all counts agree on, or why there is none."""
    known = [c for c in crossings if c.net is not None]
    if len(known) < 2 * criteria.curves:
        why = next((c.reason for c in crossings if c.reason), "")
        return None, f"only {len(known)} of {2 * criteria.curves} counts are resolved: {why}"
    said = {(c.net or 0) * (-1 if c.termination == "upper" else 1) for c in known}
    if len(said) > 1:
        return None, f"the two half-crystals or curves count differently: {sorted(said)}"
    return said.pop(), ""


def _by_side(ends: tuple[ArcEnd, ...]) -> tuple[int, int]:
    return sum(e.side == 0 for e in ends), sum(e.side == 1 for e in ends)


def _ends(loop: Loop, projection: Projection, chirality: int) -> tuple[tuple[ArcEnd, ...], str]:
    """Levels at the node's energy on the circle; they must add up to what was counted."""
    spread = projection.energy_max_ev - projection.energy_min_ev
    if spread > SAME_ENERGY_EV:
        return (), f"energies of its nodes differ by {1e3 * spread:.3g} meV"
    energy = projection.energy_ev
    t = np.arange(LOOP_POINTS + 1) / LOOP_POINTS
    k_par = loop.k_at(t)
    low, high = windows(loop.stack, k_par, loop.filling)
    if np.any(low > energy) or np.any(high < energy):
        return (), "bulk states at the energy of its nodes lie on the circle"
    found = surface_levels(
        loop.stack, k_par, np.maximum(low, energy - NEAR_EV), np.minimum(high, energy + NEAR_EV)
    )
    ends = []
    for side in (0, 1):
        for i in range(LOOP_POINTS):
            for share, sign in _passed(found[i].of(side), found[i + 1].of(side), energy):
                x, y = loop.k_at(np.array([t[i] + share / LOOP_POINTS]))[0].tolist()
                ends.append(ArcEnd(side, (x, y), sign))
    for side, direction in ((0, -1), (1, 1)):
        if sum(e.sign for e in ends if e.side == side) * direction != chirality:
            return (), "levels at the energy of its nodes were not all found on the circle"
    return tuple(ends), ""


def _passed(before: FloatArray, after: FloatArray, energy: float) -> list[tuple[float, int]]:
    """Share of the step and direction of each level that passes the energy on it."""
    found: list[tuple[float, int]] = []
    for e in before:
        if not len(after):
            break
        f = after[np.abs(after - e).argmin()]
        back = before[np.abs(before - f).argmin()]
        if back == e and (e < energy) != (f < energy):
            found.append((float((energy - e) / (f - e)), 1 if f > e else -1))
    return found
