"""Tipping points of an insulator with inversion: parities at the TRIM, nothing else.

With inversion and time reversal the Fu-Kane indices change only where states of opposite parity
change places at a TRIM (Fu and Kane, Phys. Rev. B 76, 045302 (2007),
doi:10.1103/PhysRevB.76.045302): a gap that closes elsewhere leaves the parities alone. Whether the
gap stays open elsewhere is another question, which is not asked here.

Without spin-orbit coupling the bands are two copies of spinless ones, and parities whose product
over a plane of TRIM is -1 belong to spinless bands with nodes (Kim, Wieder, Kane, Rappe, Phys. Rev.
Lett. 115, 036806 (2015), doi:10.1103/PhysRevLett.115.036806): indices that last until the scale is
0 end there, with the gap.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.invariants.exchange import (
    RESOLUTION,
    FirstExchange,
    first_exchange,
    parity_blocks,
)
from topovet.invariants.parity import indices_of_counts
from topovet.invariants.tipping.results import BY_PARITY, SCALE, TippingPoint

SAME_STAR_SHARE, SAME_STAR = 0.1, 0.005
"""TRIM that the crystal's rotations map to each other change together if their critical values
(eV or factor) agree to within this share or this value: Wannier functions keep the crystal's
symmetry less well than that."""

COMMUTES = 1e-6
"""Largest element of D V - V D, over the largest of V, with which V keeps inversion."""


@dataclass(frozen=True, slots=True, eq=False)
class TrimGround:
    """What every search at the TRIM shares.

    Attributes
    ----------
    k_trim
        (n_k, 3) all TRIM.
    h, inversion
        H(K) in eV and D(K), (n_k, n_orb, n_orb).
    star
        (n_k,) equal numbers for TRIM that the crystal's rotations map to each other.
    filling
        Occupied bands, spin counted.
    periodic
        Periodic directions.
    """

    k_trim: FloatArray
    h: ComplexArray
    inversion: ComplexArray
    star: IntArray
    filling: int
    periodic: tuple[bool, bool, bool]


def trim_stars(k_trim: FloatArray, rotations: IntArray) -> IntArray:
    """(n_k,) number of the star of each TRIM under rotations (n_op, 3, 3), k' = k W^-1."""
    star = np.arange(len(k_trim))
    for inverse in np.linalg.inv(np.asarray(rotations, dtype=float)):
        image = np.round(2 * (k_trim @ inverse)) % 2 / 2
        for i, j in np.argwhere((image[:, None] == k_trim[None]).all(axis=2)):
            star[star == star[j]] = star[i]
    return star


def keeps_inversion(ground: TrimGround, v_trim: ComplexArray) -> bool:
    """Whether a change V(K) leaves inversion what it is."""
    d = ground.inversion
    broken = np.abs(d @ v_trim - v_trim @ d).max(initial=0.0)
    return bool(broken <= COMMUTES * np.abs(v_trim).max(initial=0.0))


def tip_by_parity(
    ground: TrimGround, v_trim: ComplexArray, reach: float, point: TippingPoint
) -> tuple[TippingPoint, int]:
    """Turn one parameter from 0 to `reach` and tell what the parities do.

    Parameters
    ----------
    ground
        The Hamiltonian at the TRIM.
    v_trim
        (n_k, n_orb, n_orb) change per unit of the parameter, eV; averaged over inversion.
    reach
        End of the range, of either sign; a scale is counted from 1.
    point
        Names of the parameter; what is found is filled in.

    Returns
    -------
    TippingPoint, int
        And the eigenvalue problems that it took.
    """
    found = [
        first_exchange(parity_blocks(h, v, d), ground.filling // 2, reach)
        for h, v, d in zip(ground.h, v_trim, ground.inversion, strict=True)
    ]
    n_solves = 2 * sum(f.n_solves for f in found)
    offset = 1.0 if point.parameter == SCALE else 0.0
    z2, z4 = _indices(ground, [f.n_odd for f in found])
    point = replace(point, method=BY_PARITY, z2_before=z2, z4_before=z4)
    free = min(abs(f.free_up_to) for f in found)
    leader = _leader(found)
    if leader is None or abs(found[leader].free_up_to) > free:
        settled = leader is None and free >= abs(reach)
        searched = offset + float(np.sign(reach)) * free
        note = "" if settled else "levels of opposite parity stay together at a TRIM"
        outcome = "holds" if settled else "open"
        point = replace(point, outcome=outcome, searched_to=searched, note=note)
        return _without_coupling(point), n_solves
    return _describe(ground, found, leader, offset, point), n_solves


def _without_coupling(point: TippingPoint) -> TippingPoint:
    """A scale that was turned down to 0 under indices that need spin-orbit coupling."""
    at_zero = point.parameter == SCALE and point.outcome == "holds" and point.searched_to == 0.0
    if not (at_zero and any(point.z2_before or ())):
        return point
    note = "bands without spin-orbit coupling have nodes where their parities are such"
    return replace(point, outcome="closes", critical=0.0, note=note)


def _leader(found: list[FirstExchange]) -> int | None:
    """The TRIM with the nearest exchange."""
    sizes = [np.inf if f.at is None else abs(f.at) for f in found]
    best = int(np.argmin(sizes))
    return best if np.isfinite(sizes[best]) else None


def _describe(
    ground: TrimGround,
    found: list[FirstExchange],
    leader: int,
    offset: float,
    point: TippingPoint,
) -> TippingPoint:
    at = found[leader].at
    assert at is not None
    last = max(abs(found[i].at or 0.0) for i in _together(ground, found, leader))
    # other stars may exchange states at the same value: their order cannot be told
    passed = [f.at is not None and abs(f.at) <= last + 2 * RESOLUTION for f in found]
    after = [f.n_odd_after if gone else f.n_odd for f, gone in zip(found, passed, strict=True)]
    sizes = [abs(f.at or 0.0) for f, gone in zip(found, passed, strict=True) if gone]
    gained = {f.n_odd_after - f.n_odd for f, gone in zip(found, passed, strict=True) if gone}
    z2, z4 = _indices(ground, after)
    changed = (z2, z4) != (point.z2_before, point.z4_before)
    return replace(
        point,
        outcome="flips" if changed else "exchange",
        critical=offset + at,
        searched_to=offset + at,
        k=tuple((float(x), float(y), float(z)) for x, y, z in ground.k_trim[passed]),
        n_exchanged=2 * gained.pop() if len(gained) == 1 else None,
        z2_after=z2,
        z4_after=z4,
        spread=max(sizes) - min(sizes),
    )


def _together(ground: TrimGround, found: list[FirstExchange], leader: int) -> list[int]:
    """The TRIM of the leader's star if all of them change alike, else the leader alone."""
    members: list[int] = np.flatnonzero(ground.star == ground.star[leader]).tolist()
    nearest, change = found[leader], found[leader].n_odd_after - found[leader].n_odd
    assert nearest.at is not None
    tolerance = max(SAME_STAR, SAME_STAR_SHARE * abs(nearest.at))
    for i in members:
        other = found[i]
        if other.at is None or other.n_odd_after - other.n_odd != change:
            return [leader]
        if abs(other.at - nearest.at) > tolerance:
            return [leader]
    return members


def _indices(ground: TrimGround, odd_pairs: list[int]) -> tuple[tuple[int, ...], int | None]:
    n_odd = 2 * np.array(odd_pairs)
    return indices_of_counts(ground.k_trim, n_odd, ground.filling, ground.periodic)
