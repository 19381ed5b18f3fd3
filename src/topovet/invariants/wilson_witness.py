"""The Wilson-loop witness: Z2 indices from all time-reversal-invariant planes.

With Z2 of the planes k_i = 0 and k_i = 1/2 the weak index nu_i is that of k_i = 1/2, and nu0 is the
sum of the two modulo 2 for each of the three directions, which must agree (Fu, Kane, Mele, PRL 98,
106803 (2007), doi:10.1103/PhysRevLett.98.106803; Yu, Qi, Bernevig, Fang, Dai, Phys. Rev. B 84,
075119 (2011), doi:10.1103/PhysRevB.84.075119). No inversion is needed, and none is used.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from topovet.arrays import FloatArray
from topovet.invariants.results import WilsonPlane, WilsonWitness
from topovet.invariants.wilson_plane import compute_wilson_plane
from topovet.invariants.wilson_sheet import SheetCriteria
from topovet.model.fourier import BlochSum
from topovet.model.plane import KPlane, invariant_planes
from topovet.spectrum.eigen import map_threads
from topovet.spectrum.gap import GAPLESS_EV


def compute_wilson(
    bloch: BlochSum,
    filling: int,
    periodic: tuple[bool, bool, bool],
    *,
    time_reversal: bool,
    spinful: bool,
    criteria: SheetCriteria | None = None,
    equivalent: Sequence[Sequence[str]] = (),
    both_ways: bool = True,
    positions_frac: FloatArray | None = None,
) -> WilsonWitness:
    """(nu0; nu1 nu2 nu3) in 3D, (nu,) in 2D, from Wilson loops.

    Parameters
    ----------
    bloch
        Hamiltonian, spinors interlaced.
    filling
        Occupied bands, spin counted; a smaller number asks about the bands below a lower gap.
    periodic
        Periodic directions, three or two.
    time_reversal, spinful
        Whether time reversal is a symmetry and squares to -1; without both there is no Z2.
    criteria
        Convergence criteria and the budget of each plane.
    equivalent
        Groups of plane names ("k1=0", "k2=0", …) that a symmetry maps to each other: only the
        first of each group is solved.
    both_ways
        Whether every plane is covered a second time with the loops along its other direction,
        which shares hardly a k with the first: a plane on which the two differ is unresolved. A
        plane that is unresolved the first way is given the second in any case.
    positions_frac
        See `topovet.invariants.wilson_plane.compute_wilson_plane`.

    Returns
    -------
    WilsonWitness
        status "ok" with the indices, or why there are none.
    """
    reason = _why_not(filling, bloch.n_orb, time_reversal=time_reversal, spinful=spinful)
    if reason:
        status = "failed" if time_reversal and spinful else "not-applicable"
        return WilsonWitness(status, reason, None, (), (), (), 0)
    source = {name: group[0] for group in equivalent for name in group}
    planes = invariant_planes(periodic)
    unknown = set(source) - {plane.name for plane in planes}
    if unknown:
        raise ValueError(f"no such planes: {', '.join(sorted(unknown))}")
    to_solve = [plane for plane in planes if source.get(plane.name, plane.name) == plane.name]

    def sweep(plane: KPlane) -> WilsonPlane:
        return compute_wilson_plane(bloch, plane, filling, criteria, positions_frac=positions_frac)

    def solve(plane: KPlane) -> WilsonPlane:
        first = sweep(plane)
        if first.status == "ok" and not both_ways:
            return first
        return _combine(first, sweep(plane.turned()))

    solved = {plane.plane: plane for plane in map_threads(solve, to_solve)}
    taken = {plane.name: solved[source.get(plane.name, plane.name)] for plane in planes}
    return _conclude(taken, solved, tuple((n, s) for n, s in source.items() if n != s))


def _combine(first: WilsonPlane, second: WilsonPlane) -> WilsonPlane:
    """One plane covered in both directions: the first way unless only the second was resolved."""
    chosen = second if first.z2 is None and second.z2 is not None else first
    chosen = replace(
        chosen,
        n_solves=first.n_solves + second.n_solves,
        smallest_direct_gap_ev=min(first.smallest_direct_gap_ev, second.smallest_direct_gap_ev),
        narrowest_k=min(first, second, key=lambda p: p.smallest_direct_gap_ev).narrowest_k,
    )
    if chosen.smallest_direct_gap_ev < GAPLESS_EV:
        reason = first.reason or second.reason
        return replace(chosen, status="unresolved", reason=reason, z2=None)
    if first.z2 is None or second.z2 is None or first.z2 == second.z2:
        return chosen
    reason = (
        f"loops along the two directions disagree ({first.z2} and {second.z2}): the mesh is too "
        "coarse for a feature of the bands"
    )
    return replace(chosen, status="unresolved", reason=reason, z2=None)


def _why_not(filling: int, n_orb: int, *, time_reversal: bool, spinful: bool) -> str:
    if not spinful:
        return "Z2 needs spin-orbit coupled spinors; these Wannier functions carry no spin"
    if not time_reversal:
        return "Z2 needs time reversal, which is broken"
    if filling % 2:
        return f"filling {filling} is odd, which Kramers pairs do not allow in an insulator"
    if not 0 < filling < n_orb:
        return f"filling {filling} leaves no gap among {n_orb} bands"
    return ""


def _conclude(
    taken: dict[str, WilsonPlane],
    solved: dict[str, WilsonPlane],
    assumed_equal: tuple[tuple[str, str], ...],
) -> WilsonWitness:
    """Indices from the planes, in the order k1=0, k1=1/2, k2=0, … or one plane in 2D."""
    values = [plane.z2 for plane in taken.values()]
    weak = values[1::2]
    strong = tuple(
        None if low is None or high is None else (low + high) % 2
        for low, high in zip(values[::2], weak, strict=True)
    ) if len(values) > 1 else (values[0],)  # fmt: skip
    open_planes = [plane for plane in solved.values() if plane.z2 is None]
    known = {nu0 for nu0 in strong if nu0 is not None}
    status, reason, z2 = "ok", "", None
    if len(known) > 1:
        status = "failed"
        shown = ", ".join("?" if nu0 is None else str(nu0) for nu0 in strong)
        reason = (
            f"nu0 is {shown} from the three pairs of planes: the gap closes between planes, "
            "or time reversal does not hold"
        )
    elif open_planes:
        status = "unresolved"
        reason = "; ".join(f"plane {plane.plane}: {plane.reason}" for plane in open_planes)
    else:
        z2 = (*known, *(nu for nu in weak if nu is not None))
    n_solves = sum(plane.n_solves for plane in solved.values())
    planes = tuple(solved.values())
    return WilsonWitness(status, reason, z2, strong, planes, assumed_equal, n_solves)
