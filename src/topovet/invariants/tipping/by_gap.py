"""Tipping points where parities do not speak: the gap closes, Wilson loops say what lies beyond.

Without inversion a gapless phase may lie between two insulators (Murakami, New J. Phys. 9, 356
(2007), doi:10.1088/1367-2630/9/9/356), so indices are asked for at the first points beyond the
closing at which the sampled gap is open again. Where no closing was met they are asked for at the
end of the range: other ones there mean that a closing was missed, and they bracket it themselves.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.invariants.tipping.closing import (
    REOPENED_EV,
    Closing,
    closing_rate,
    first_closing,
    gap_minima,
)
from topovet.invariants.tipping.results import BY_GAP, SCALE, TippingPoint
from topovet.invariants.wilson_sheet import CRITERIA
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.fourier import BlochSum, added_sum
from topovet.notation import mev
from topovet.units import MEV_PER_EV

BEYOND = (0.02, 0.05, 0.1, 0.2)
"""Distances beyond a closing, in eV or as a factor, at which the gap is looked at again."""

BRACKET = 0.05
"""Length, in eV or as a factor, of the interval in which indices alone enclose a missed closing."""

SAME_LEVEL_EV = 1e-3
"""Levels closer than this to a band edge are one multiplet."""


@dataclass(frozen=True, slots=True, eq=False)
class GapGround:
    """What every search along the gap shares.

    Attributes
    ----------
    bloch
        The Hamiltonian; time reversal holds and squares to -1.
    filling, periodic
        Occupied bands and periodic directions.
    z2
        Indices at the start.
    known_k
        (n, 3) k at which the gap is known to be small.
    """

    bloch: BlochSum
    filling: int
    periodic: tuple[bool, bool, bool]
    z2: tuple[int, ...]
    known_k: FloatArray


def gap_slope(ground: GapGround, change: BlochSum) -> float:
    """First-order change of the smallest direct gap per unit of the parameter, eV."""
    k = ground.known_k[:1]
    energies, states = np.linalg.eigh(ground.bloch.at(k)[0])
    v = np.real(np.einsum("ib,ij,jb->b", states.conj(), change.at(k)[0], states, optimize=True))
    n = ground.filling
    occupied, empty = np.arange(len(v)) < n, np.arange(len(v)) >= n
    top = occupied & (energies > energies[n - 1] - SAME_LEVEL_EV)
    bottom = empty & (energies < energies[n] + SAME_LEVEL_EV)
    return float(v[bottom].mean() - v[top].mean())


def tip_by_gap(
    ground: GapGround, change: BlochSum, reach: float, point: TippingPoint, *, max_solves: int
) -> tuple[TippingPoint, int]:
    """Turn one parameter from 0 to `reach`, or until the gap closes, and ask what lies beyond.

    Parameters
    ----------
    ground
        The Hamiltonian.
    change
        V(k), eV per unit of the parameter.
    reach
        End of the range, of either sign; a scale is counted from 1.
    point
        Names of the parameter; what is found is filled in.
    max_solves
        Diagonalisations that may be spent on following the gap.

    Returns
    -------
    TippingPoint, int
        And the eigenvalue problems that it took.
    """
    rate = closing_rate(change)
    closing = first_closing(
        ground.bloch,
        change,
        ground.filling,
        ground.periodic,
        reach,
        known=ground.known_k,
        rate=rate,
        max_solves=max_solves,
    )
    offset = 1.0 if point.parameter == SCALE else 0.0
    point = replace(
        point,
        method=BY_GAP,
        z2_before=ground.z2,
        searched_to=offset + closing.reached,
        k=(closing.k,),
        outcome="holds" if closing.finished else "open",
        note=f"smallest sampled direct gap {mev(MEV_PER_EV * closing.smallest_ev)}",
    )
    if closing.at is None and not closing.finished:
        note = f"the budget of eigenvalue problems ended; {point.note}"
        return replace(point, note=note), closing.n_solves
    if closing.at is None:
        return _at_the_end(ground, change, closing, offset, point)
    point = replace(point, critical=offset + closing.at, outcome="closes")
    return _beyond(ground, change, closing, offset, point, float(np.sign(reach)))


def _beyond(
    ground: GapGround,
    change: BlochSum,
    closing: Closing,
    offset: float,
    point: TippingPoint,
    sign: float,
) -> tuple[TippingPoint, int]:
    """Indices at the first point beyond the closing where the gap is wide enough."""
    assert closing.at is not None
    n_solves, known = closing.n_solves, np.concatenate([ground.known_k, [closing.k]])
    for distance in BEYOND:
        t = closing.at + sign * distance
        there = added_sum(ground.bloch, change, t)
        minima = gap_minima(there, ground.filling, ground.periodic, known)
        known, n_solves = minima.k_frac, n_solves + minima.n_solves
        gap = float(minima.values[0])
        if gap < REOPENED_EV:
            continue
        z2, spent = _indices(ground, there)
        n_solves += spent
        if z2 is None:
            continue
        where = f"at {point.value_text(offset + t)} the sampled gap is {mev(MEV_PER_EV * gap)}"
        return _judged(point, z2, offset + t, where), n_solves
    least, reach = mev(MEV_PER_EV * REOPENED_EV), point.value_text(BEYOND[-1])
    note = f"no sampled gap of {least} with indices again within {reach} of it"
    return replace(point, note=note), n_solves


def _judged(
    point: TippingPoint, z2: tuple[int, ...], searched_to: float, where: str
) -> TippingPoint:
    outcome = "flips" if z2 != point.z2_before else "reopens"
    return replace(point, outcome=outcome, z2_after=z2, searched_to=searched_to, note=where)


def _at_the_end(
    ground: GapGround, change: BlochSum, closing: Closing, offset: float, point: TippingPoint
) -> tuple[TippingPoint, int]:
    """The gap was never met closed: the same indices at the end of the range confirm it."""

    def at(t: float) -> tuple[tuple[int, ...] | None, int]:
        return _indices(ground, added_sum(ground.bloch, change, t))

    z2, n_solves = at(closing.reached)
    n_solves += closing.n_solves
    if z2 == ground.z2:
        return point, n_solves
    if z2 is None:
        note = f"Wilson loops at the end of the range are not resolved; {point.note}"
        return replace(point, outcome="open", note=note), n_solves
    before, after = 0.0, closing.reached
    while abs(after - before) > BRACKET:
        middle = 0.5 * (before + after)
        found, spent = at(middle)
        n_solves += spent
        if found is None:
            break
        if found == ground.z2:
            before = middle
        else:
            after, z2 = middle, found
    note = (
        f"enclosed by indices alone, between {point.value_text(offset + before)} and "
        f"{point.value_text(offset + after)}; {point.note}"
    )
    critical = offset + 0.5 * (before + after)
    return _judged(replace(point, critical=critical), z2, offset + after, note), n_solves


def _indices(ground: GapGround, bloch: BlochSum) -> tuple[tuple[int, ...] | None, int]:
    """Z2 by Wilson loops, None where they are not resolved, and the solves."""
    wilson = compute_wilson(
        bloch,
        ground.filling,
        ground.periodic,
        time_reversal=True,
        spinful=True,
        criteria=CRITERIA["quick"],
    )
    return wilson.z2 if wilson.status == "ok" else None, wilson.n_solves
