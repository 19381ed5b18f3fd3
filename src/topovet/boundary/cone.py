"""A Dirac cone of a surface: the two bands of a Kramers pair followed outwards, and their shape.

Along a fixed azimuth both bands are smooth in k: with time reversal E_-(k) is E_+(-k), so that

    E_+-(k) = E_D + b k^2 +- (v k + c k^3) + ...

and b, v, c follow from linear least squares.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.boundary.cone_results import KramersPair
from topovet.boundary.layers import LayerStack
from topovet.boundary.levels import Levels, surface_levels
from topovet.boundary.projected import projected_edges
from topovet.boundary.recut import Recut

EDGE_MARGIN_EV = 3e-3
"""Levels are looked for no nearer to the projected bulk bands than this."""

AZIMUTHS = 6
"""Directions over half a turn: every 30 degrees of the whole."""

RING_EV = 0.04
"""By how much the bands move, on average, from ring to ring."""

MOST_RINGS = 14
"""Rings in all."""

WIDEST_STEP = 2.5
"""Of the first radius: rings are no farther apart."""

NEAR_EV = 0.15
"""On the first ring levels are looked for this near to the pair."""

FIRST_STEP = 0.01
"""Of the shortest reciprocal vector: where the slope is found first."""

FURTHEST = 0.35
"""Of the shortest reciprocal vector: bands are followed no further."""

HEADROOM = 1.3
"""Bands are followed so many times as far as the window reaches at the pair."""

LEAST_REACH_EV = 0.05
"""The same where the pair lies at an edge of its window."""

LOST_SHARE, LOST_EV = 0.4, 0.008
"""A level farther from the extrapolated band than this share of the last step, plus this, is
another one."""

FIT_POINTS = 4
"""Innermost radii that the slope is fitted to; without the first, which is for orientation."""


@dataclass(frozen=True, slots=True, eq=False)
class Branches:
    """The two bands of a cone; see `topovet.boundary.cone_results.Cone`.

    Attributes
    ----------
    azimuth_rad
        (n_theta,).
    k_ang
        (n_k,) 1/angstrom.
    upper_ev, lower_ev
        (n_theta, n_k) eV.
    """

    azimuth_rad: FloatArray
    k_ang: FloatArray
    upper_ev: FloatArray
    lower_ev: FloatArray


def surface_trim(cut: Recut) -> FloatArray:
    """(4 or 2, 2) time-reversal-invariant momenta of the surface, fractional."""
    second = (0.0, 0.5) if len(cut.axes) == 2 else (0.0,)
    return np.array([(a, b) for a in (0.0, 0.5) for b in second])


def windows(stack: LayerStack, k_par: FloatArray, filling: int) -> tuple[FloatArray, FloatArray]:
    """(n,) energies between which levels are looked for: inside the projected bulk bands."""
    edges = projected_edges(stack, k_par, filling)
    return edges.top_ev + EDGE_MARGIN_EV, edges.bottom_ev - EDGE_MARGIN_EV


def kramers_pairs(
    levels: Sequence[Levels], k_par: FloatArray, low: FloatArray, high: FloatArray, n_axes: int
) -> list[KramersPair]:
    """Pairs among the levels at the surface TRIM; a level without a partner makes none."""
    pairs = []
    for k, found, start, end in zip(k_par, levels, low, high, strict=True):
        for side in (0, 1):
            energies = found.of(side)
            for a, b in zip(energies[0::2], energies[1::2], strict=False):
                pair = KramersPair(
                    side=side,
                    k_par=tuple(float(c) for c in k[:n_axes]),
                    energy_ev=float(a + b) / 2,
                    split_ev=float(b - a),
                    window_low_ev=float(start - EDGE_MARGIN_EV),
                    window_high_ev=float(end + EDGE_MARGIN_EV),
                )
                pairs.append(pair)
    return pairs


def k_around(
    cut: Recut, pair: KramersPair, azimuth_rad: FloatArray, k_ang: FloatArray
) -> FloatArray:
    """(n_theta, n_k, 2) fractional k_par at distances and azimuths from the pair.

    Azimuths count from b'_1, counter-clockwise as seen from outside the pair's surface; an edge has
    0 alone.
    """
    centre = np.array([*pair.k_par, 0.0][:2])
    reciprocal = cut.reciprocal
    if len(cut.axes) == 1:
        k = k_ang / reciprocal[0, 0] * np.cos(azimuth_rad)[:, None]
        return np.asarray(centre + np.stack([k, 0 * k], axis=-1))
    first = reciprocal[0] / np.linalg.norm(reciprocal[0])
    # a'_1, a'_2 and the normal are right-handed; seen from outside the upper half, which looks
    # along -n, the turn from b'_1 to b'_2 is clockwise
    turned = np.array([-first[1], first[0]]) * _turn(cut, pair.side)
    along = np.cos(azimuth_rad)[:, None] * first + np.sin(azimuth_rad)[:, None] * turned
    cartesian = k_ang[None, :, None] * along[:, None, :]
    return np.asarray(centre + cartesian @ np.linalg.inv(reciprocal))


def _turn(cut: Recut, side: int) -> float:
    """+1 where the frame of `Recut.reciprocal` is right-handed as seen from outside."""
    up = float(np.dot(np.cross(cut.cell[0], cut.cell[1]), cut.normal_cart))
    outward = -1.0 if side == 0 else 1.0
    return float(np.sign(up) * outward)


def follow_cone(stack: LayerStack, cut: Recut, filling: int, pair: KramersPair) -> Branches:
    """The two bands of a pair along evenly spread azimuths, ring by ring, until bulk states come.

    Parameters
    ----------
    stack, cut, filling
        The crystal by planes, their cell, and the occupied bands.
    pair
        Where the bands meet.
    """
    n_theta = AZIMUTHS if len(cut.axes) == 2 else 1
    azimuth = np.pi * np.arange(n_theta) / n_theta
    shortest = _shortest(cut)
    radii = [FIRST_STEP * shortest]
    k = k_around(cut, pair, azimuth, np.array(radii))[:, 0]
    low, high = windows(stack, k, filling)
    nearby = surface_levels(
        stack,
        k,
        np.maximum(low, pair.energy_ev - NEAR_EV),
        np.minimum(high, pair.energy_ev + NEAR_EV),
        sides=(pair.side,),
    )
    bands: list[_Band] = []
    for i, found in enumerate(nearby):
        down, up = _nearest_two(found.of(pair.side), pair.energy_ev)
        bands += [
            _Band(i, [pair.energy_ev, up], up > down),
            _Band(i, [pair.energy_ev, down], up > down),
        ]
    above = pair.energy_ev + HEADROOM * max(pair.window_high_ev - pair.energy_ev, LEAST_REACH_EV)
    below = pair.energy_ev - HEADROOM * max(pair.energy_ev - pair.window_low_ev, LEAST_REACH_EV)
    while len(radii) < MOST_RINGS:
        alive = [b for b in bands if b.alive and below < b.energies[-1] < above]
        steps = [b.steepness(radii) for b in alive]
        if not steps:
            break
        step = min(RING_EV / max(np.median(steps), 1e-3), WIDEST_STEP * radii[0])
        if radii[-1] + step > FURTHEST * shortest:
            break
        _advance(stack, cut, filling, pair, azimuth, radii, radii[-1] + step, alive)
        radii.append(radii[-1] + step)
    tables = [np.full((n_theta, len(radii)), np.nan) for _ in (0, 1)]
    for position, band in enumerate(bands):
        if len(band.energies) > 1 and np.isfinite(band.energies[1]):
            tables[position % 2][band.row, : len(band.energies) - 1] = band.energies[1:]
    return Branches(azimuth, np.array(radii), tables[0], tables[1])


@dataclass(slots=True)
class _Band:
    """One band along one azimuth: its energies at the pair and at the radii so far."""

    row: int
    energies: list[float]
    alive: bool

    def steepness(self, radii: list[float]) -> float:
        k = [0.0, *radii][: len(self.energies)]
        return abs((self.energies[-1] - self.energies[-2]) / (k[-1] - k[-2]))

    def expected(self, radii: list[float], at: float) -> float:
        """Extrapolated from the last three points."""
        k = np.array([0.0, *radii][: len(self.energies)])[-3:]
        order = len(k) - 1
        return float(np.polyval(np.polyfit(k, self.energies[-3:], order), at))


def _advance(
    stack: LayerStack,
    cut: Recut,
    filling: int,
    pair: KramersPair,
    azimuth: FloatArray,
    radii: list[float],
    radius: float,
    alive: list[_Band],
) -> None:
    """One ring further; a band without a level where it is expected is given up."""
    expected = np.array([b.expected(radii, radius) for b in alive])
    last = np.array([b.energies[-1] for b in alive])
    room = LOST_EV + LOST_SHARE * np.abs(expected - last)
    ring = k_around(cut, pair, azimuth, np.array([radius]))[:, 0]
    rows = sorted({b.row for b in alive})
    lows, highs = windows(stack, ring[rows], filling)
    at = np.array([rows.index(b.row) for b in alive])
    low = np.maximum(lows[at], expected - room)
    high = np.minimum(highs[at], expected + room)
    found = surface_levels(stack, ring[[b.row for b in alive]], low, high, sides=(pair.side,))
    for band, levels, energy in zip(alive, found, expected, strict=True):
        near = levels.of(pair.side)
        band.alive = len(near) > 0
        if band.alive:
            band.energies.append(float(near[np.abs(near - energy).argmin()]))


def _shortest(cut: Recut) -> float:
    reciprocal = cut.reciprocal
    if len(reciprocal) == 1:
        return float(abs(reciprocal[0, 0]))
    combinations = np.array([[1, 0], [0, 1], [1, 1], [1, -1]]) @ reciprocal
    return float(np.linalg.norm(combinations, axis=1).min())


def _nearest_two(levels: FloatArray, energy: float) -> tuple[float, float]:
    """The two levels nearest to an energy, ascending; NaN where there are none."""
    if len(levels) < 2:
        return float("nan"), float("nan")
    low, high = np.sort(levels[np.argsort(np.abs(levels - energy), kind="stable")[:2]])
    return float(low), float(high)


@dataclass(frozen=True, slots=True, eq=False)
class Shape:
    """What the fits say; (n_theta,) velocity in eV angstrom and curvature in eV angstrom^2."""

    velocity_ev_ang: FloatArray
    curvature_ev_ang2: FloatArray
    spread_ev_ang: float


def fit_shape(branches: Branches, energy_ev: float) -> Shape:
    """Slope and curvature at the pair along each azimuth."""
    fits = [_fitted(branches, energy_ev, points) for points in (FIT_POINTS, FIT_POINTS - 1)]
    moved = np.abs(fits[0][:, 0] - fits[1][:, 0])
    spread = float(np.nanmax(moved)) if np.isfinite(moved).any() else float("nan")
    return Shape(fits[0][:, 0], fits[0][:, 1], spread)


def _fitted(branches: Branches, energy_ev: float, points: int) -> FloatArray:
    """(n_theta, 2) v and b from the innermost points of both bands."""
    fitted = []
    for up, down in zip(branches.upper_ev, branches.lower_ev, strict=True):
        k = np.concatenate([branches.k_ang[:points], branches.k_ang[:points]])
        sign = np.repeat([1.0, -1.0], len(k) // 2)
        energy = np.concatenate([up[:points], down[:points]]) - energy_ev
        known = np.isfinite(energy)
        if known.sum() < 3:
            fitted.append([np.nan, np.nan])
            continue
        terms = np.stack([sign * k, k**2, sign * k**3], axis=1)[known]
        fitted.append(np.linalg.lstsq(terms, energy[known], rcond=None)[0][:2].tolist())
    return np.array(fitted)
