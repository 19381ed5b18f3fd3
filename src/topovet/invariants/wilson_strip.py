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
from topovet.invariants.wilson_loop import defects_of, link_overlaps


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
    zips = [_zip(lower, upper) for lower, upper in strips]
    counts = np.array([len(z.lower) for z in zips])
    left = [_states(a, z.lower, closing) for (a, _), z in zip(strips, zips, strict=True)]
    right = [_states(b, z.upper, closing) for (_, b), z in zip(strips, zips, strict=True)]
    overlaps = link_overlaps(np.concatenate(left), np.concatenate(right))
    phase, losses = np.angle(np.linalg.det(overlaps)), _losses(overlaps, limits.loss)
    edge = np.concatenate([_edges(*s, z) for s, z in zip(strips, zips, strict=True)])
    start = np.cumsum(counts) - counts
    following = np.arange(1, len(phase) + 1)
    following[start + counts - 1] = start
    # around each plaquette: across, along its edges, and back across
    around = (phase + edge - phase[following]) / (2 * np.pi)
    flux = np.round(around) - around  # A = i <u|du> is minus the phase of an overlap
    large = 2 * np.pi * np.abs(flux) > limits.flux
    beyond = (losses > limits.loss) | large
    beyond[following[large]] = True
    return [
        StripFlux(
            float(flux[part].sum()),
            float(2 * np.pi * np.abs(flux[part]).max()),
            float(losses[part].max()),
            _coarse_edges(lower, z.lower[beyond[part]], upper.across - lower.across),
            _coarse_edges(upper, z.upper[beyond[part]], upper.across - lower.across),
        )
        for (lower, upper), z, part in zip(
            strips, zips, map(slice, start, start + counts), strict=True
        )
    ]


@dataclass(frozen=True, slots=True, eq=False)
class _Zip:
    """Links across a strip in order, and the plaquette that follows each.

    Attributes
    ----------
    lower, upper
        (n_links,) corners of each link, counted on over the end of their line.
    on_lower, on_upper
        (n_links,) whether the plaquette after the link has an edge on either line.
    """

    lower: IntArray
    upper: IntArray
    on_lower: BoolArray
    on_upper: BoolArray


def _zip(lower: SolvedLine, upper: SolvedLine) -> _Zip:
    """Edges of both lines by the height of their middles: no link across is longer than need be."""
    heights, rank = np.unique(
        np.concatenate([_middles(lower), _middles(upper)]), return_inverse=True
    )
    on_lower, on_upper = np.zeros((2, len(heights)), dtype=bool)
    on_lower[rank[: lower.n_points]] = True
    on_upper[rank[lower.n_points :]] = True
    return _Zip(np.cumsum(on_lower) - on_lower, np.cumsum(on_upper) - on_upper, on_lower, on_upper)


def _middles(line: SolvedLine) -> FloatArray:
    y = np.append(line.along, line.along[0] + 1.0)
    return np.asarray((y[:-1] + y[1:]) / 2)


def _states(line: SolvedLine, index: IntArray, closing: ComplexArray | None) -> ComplexArray:
    assert line.states is not None
    states = line.states[index % line.n_points]
    if closing is not None:
        states[index >= line.n_points] *= closing[:, None]
    return states


def _losses(overlaps: ComplexArray, limit: float) -> FloatArray:
    """|1 - M†M|, or the sum of 1 - s^2, which is no smaller and cheaper, where that is in order."""
    n_occ = overlaps.shape[1]
    flat = overlaps.reshape(len(overlaps), -1)
    losses = n_occ - (flat.real**2 + flat.imag**2).sum(axis=1)
    doubtful = losses > limit
    if doubtful.any():
        losses[doubtful] = np.linalg.norm(defects_of(overlaps[doubtful]), axis=(1, 2))
    return np.asarray(losses)


def _edges(lower: SolvedLine, upper: SolvedLine, z: _Zip) -> FloatArray:
    """Phase along the edges of each plaquette: on along the upper line, back along the lower."""
    on = z.on_upper * upper.link_phases[z.upper % upper.n_points]
    return np.asarray(on - z.on_lower * lower.link_phases[z.lower % lower.n_points])


def _coarse_edges(line: SolvedLine, corners: IntArray, width: float) -> FloatArray:
    """Middles of edges on either side of the corners that are longer than the strip is wide."""
    if len(corners) == 0:
        return np.empty(0)
    edges = np.unique(np.concatenate([corners, corners - 1]) % line.n_points)
    length = np.diff(line.along, append=line.along[0] + 1.0)
    return np.asarray(_middles(line)[edges][length[edges] > width])
