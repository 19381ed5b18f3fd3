"""Berry flux through the strip between two neighbouring lines, plaquette by plaquette.

The strip is cut into plaquettes: squares where both lines have an edge at the same height, else
triangles with two corners on one line and one on the other, so that the lines need not have the
same points. With the phases arg det <u|u'> of the links around it the flux through a plaquette is a
gauge-invariant number in (-pi, pi] (Fukui, Hatsugai, Suzuki, J. Phys. Soc. Jpn. 74, 1674 (2005),
doi:10.1143/JPSJ.74.1674); small ones are right, those near pi are not to be trusted. Their sum over
the strip is by how much the sum of the hybrid Wannier centres moves from the first line to the
second, whole turns included.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from topovet.invariants.wilson_line import SolvedLine
from topovet.invariants.wilson_loop import LinePoints, defects_of, link_overlaps

NOWHERE = np.empty(0)


@dataclass(frozen=True, slots=True, eq=False)
class StripFlux:
    """Berry flux between two lines.

    Attributes
    ----------
    turns
        Flux over 2 pi, counted like the movement of the sum of hybrid Wannier centres.
    largest
        Largest |flux| through one plaquette, radians.
    loss
        Largest |1 - M†M| of the links across the strip.
    coarse_lower, coarse_upper
        Middles of those edges on either line that are longer than the strip is wide and lie next
        to a link or plaquette beyond the limits: points are missing there rather than a line.
    """

    turns: float
    largest: float
    loss: float
    coarse_lower: FloatArray
    coarse_upper: FloatArray


@dataclass(frozen=True, slots=True)
class StripLimits:
    """What a strip of lines close enough keeps to.

    Attributes
    ----------
    flux
        Largest |Berry flux| through a plaquette, radians; above pi it would be counted wrongly.
    loss
        Largest |1 - M†M| of a link across a strip.
    """

    flux: float = np.pi / 2
    loss: float = 0.8


def strip_fluxes(
    strips: list[tuple[SolvedLine, SolvedLine]],
    limits: StripLimits,
    closing: ComplexArray | None = None,
) -> list[StripFlux]:
    """Flux through each of a list of strips, all overlaps in one batch.

    Parameters
    ----------
    strips
        Neighbouring lines, states included.
    limits
        Beyond which links and plaquettes are reported.
    closing
        See `topovet.invariants.wilson_loop.loop_links`.
    """
    lower, upper = (_side([strip[i] for strip in strips]) for i in (0, 1))
    across = _zip(lower, upper)
    overlaps = link_overlaps(
        _states(lower, across.lower, closing), _states(upper, across.upper, closing)
    )
    losses = _losses(overlaps, limits.loss)
    turns = _plaquette_turns(strips, across, np.angle(np.linalg.det(overlaps)))
    flux = 2 * np.pi * np.abs(turns)
    beyond = losses > limits.loss
    beyond[flux > limits.flux] = True
    beyond[across.following[flux > limits.flux]] = True
    coarse = [(NOWHERE, NOWHERE)] * len(strips)
    for i in np.unique(across.strip[beyond]).tolist():
        here = beyond & (across.strip == i)
        coarse[i] = (
            _coarse_edges(strips[i], 0, across.lower.point[here] - lower.start[i]),
            _coarse_edges(strips[i], 1, across.upper.point[here] - upper.start[i]),
        )
    total, largest = np.add.reduceat(turns, across.start), np.maximum.reduceat(flux, across.start)
    loss = np.maximum.reduceat(losses, across.start)
    return [
        StripFlux(float(total[i]), float(largest[i]), float(loss[i]), *coarse[i])
        for i in range(len(strips))
    ]


@dataclass(frozen=True, slots=True, eq=False)
class _Corners:
    """Where links across the strips end on the lines of one side.

    Attributes
    ----------
    point
        (n_links,) index among the points of that side, lines one after the other.
    again
        (n_links,) whether that is the first point of a line once more, at its end.
    edge
        (n_links,) whether the plaquette after the link has an edge on the line.
    """

    point: IntArray
    again: BoolArray
    edge: BoolArray


@dataclass(frozen=True, slots=True, eq=False)
class _Across:
    """Links across the strips, one strip after the other, and the plaquette that follows each.

    Attributes
    ----------
    start
        (n_strips,) the first link of each strip.
    strip
        (n_links,) the strip of each link.
    following
        (n_links,) the link on the other side of the plaquette.
    lower, upper
        Their ends.
    """

    start: IntArray
    strip: IntArray
    following: IntArray
    lower: _Corners
    upper: _Corners


def _side(lines: list[SolvedLine]) -> LinePoints:
    return LinePoints(
        np.array([line.n_points for line in lines]),
        np.concatenate([line.along for line in lines]),
        np.concatenate([line.states for line in lines if line.states is not None]),
    )


def _zip(lower: LinePoints, upper: LinePoints) -> _Across:
    """Edges of both lines by the height of their middles: no link across is longer than need be."""
    # heights are below 2, so that all strips can be sorted at once
    heights = np.concatenate([2 * side.line + _middles(side) for side in (lower, upper)])
    ordered, rank = np.unique(heights, return_inverse=True)
    strip = (ordered // 2).astype(np.int64)
    counts = np.bincount(strip)
    start = np.cumsum(counts) - counts
    following = np.arange(1, len(strip) + 1)
    following[start + counts - 1] = start
    on_lower, on_upper = rank[: len(lower.along)], rank[len(lower.along) :]
    return _Across(
        start, strip, following, _corners(lower, on_lower, strip), _corners(upper, on_upper, strip)
    )


def _corners(side: LinePoints, links: IntArray, strip: IntArray) -> _Corners:
    """Ends of links on one side, given which of them are followed by its edges, in order."""
    edge = np.zeros(len(strip), dtype=bool)
    edge[links] = True
    point = np.cumsum(edge) - edge
    again = point == (side.start + side.counts)[strip]
    return _Corners(np.where(again, side.start[strip], point), again, edge)


def _middles(side: LinePoints) -> FloatArray:
    following = side.along[side.following]
    return np.asarray((side.along + following + (following <= side.along)) / 2)


def _states(side: LinePoints, ends: _Corners, closing: ComplexArray | None) -> ComplexArray:
    states = side.states[ends.point]
    if closing is not None:
        states[ends.again] *= closing[:, None]
    return states


def _plaquette_turns(
    strips: list[tuple[SolvedLine, SolvedLine]], across: _Across, phase: FloatArray
) -> FloatArray:
    """Flux over 2 pi through the plaquette after each link, from the phases of the links."""
    # across, on along the upper line, back across and along the lower
    around = phase - phase[across.following]
    around += _edge_phases([upper for _, upper in strips], across.upper)
    around -= _edge_phases([lower for lower, _ in strips], across.lower)
    around /= 2 * np.pi
    return np.asarray(np.round(around) - around)  # A = i <u|du> is minus the phase of an overlap


def _edge_phases(lines: list[SolvedLine], ends: _Corners) -> FloatArray:
    """Phase along the edge of each plaquette on one side, 0 where it has none there."""
    phases = np.concatenate([line.link_phases for line in lines])
    return np.asarray(np.where(ends.edge, phases[ends.point], 0.0))


def _losses(overlaps: ComplexArray, limit: float) -> FloatArray:
    """|1 - M†M|, or the sum of 1 - s^2, which is no smaller and cheaper, where that is in order."""
    n_occ = overlaps.shape[1]
    flat = overlaps.reshape(len(overlaps), -1)
    losses = n_occ - (flat.real**2 + flat.imag**2).sum(axis=1)
    doubtful = losses > limit
    if doubtful.any():
        losses[doubtful] = np.linalg.norm(defects_of(overlaps[doubtful]), axis=(1, 2))
    return np.asarray(losses)


def _coarse_edges(strip: tuple[SolvedLine, SolvedLine], side: int, corners: IntArray) -> FloatArray:
    """Middles of edges on either side of the corners that are longer than the strip is wide."""
    line, width = strip[side], strip[1].across - strip[0].across
    edges = np.unique(np.concatenate([corners, corners - 1]) % line.n_points)
    length = np.diff(line.along, append=line.along[0] + 1.0)[edges]
    return np.asarray((line.along[edges] + length / 2)[length > width])
