"""Indices of the bands below lower gaps: what parities, Wilson loops or Chern numbers say of each.

Every direct gap below the filling that stays open sets off a group of lowest bands with indices of
its own. They say where a band inversion sits, and what another filling of the same bands would
have. Gaps are sampled as the main one is.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.invariants.chern import compute_chern
from topovet.invariants.parity import compute_parity
from topovet.invariants.wilson_sheet import CRITERIA, SheetCriteria
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.fourier import BlochSum
from topovet.model.plane import invariant_planes
from topovet.spectrum.gap import UNRESOLVED_EV, sample_gap
from topovet.spectrum.results import GapSample
from topovet.symmetry.equivalent_planes import equivalent_planes
from topovet.symmetry.group_results import GroupTest
from topovet.symmetry.results import InversionOperator

MOST_GROUPS = 16
"""Lower gaps that are followed up in one run, the widest first."""

PLANE_BUDGET = CRITERIA["quick"]
"""Each plane of each group has the budget of the quick effort: at most 5,000 solves a sweep."""

Point3 = tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class LowerGroup:
    """The lowest bands up to one lower gap.

    Attributes
    ----------
    filling
        Number of bands, spin counted.
    direct_gap_ev, direct_k
        Smallest direct gap above them that was met, and where.
    indirect_gap_ev
        Negative where they overlap with the next band in energy.
    status
        "ok", "closed", "unresolved" or "disagree".
    reason
        Why it is not "ok"; empty otherwise.
    parity_z2, z4
        By parities; None without inversion or where they cannot be read.
    wilson_z2
        By Wilson loops; None without time reversal or spin, or where unresolved.
    chern
        Chern number or vector, where there is no Z2; else None.
    n_solves
        Eigenvalue problems solved for it.
    proved_min_ev
        Bound that the direct gap exceeds at every k; None where it was not proved.
    """

    filling: int
    direct_gap_ev: float
    direct_k: Point3
    indirect_gap_ev: float
    status: str
    reason: str
    parity_z2: tuple[int, ...] | None
    z4: int | None
    wilson_z2: tuple[int, ...] | None
    chern: tuple[int, ...] | None
    n_solves: int
    proved_min_ev: float | None = None


@dataclass(frozen=True, slots=True)
class LowerGroups:
    """All groups that were looked at.

    Attributes
    ----------
    groups
        By rising number of bands.
    n_closed
        Numbers of bands, below the filling, without an open gap above them on the mesh.
    not_looked_at
        Open ones beyond `MOST_GROUPS`.
    """

    groups: tuple[LowerGroup, ...]
    n_closed: int
    not_looked_at: tuple[int, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Ground:
    """What the groups of one case have in common.

    Attributes
    ----------
    bloch, periodic
        The Hamiltonian and its periodic directions.
    kramers
        Time reversal with spin: Z2 exists and Chern numbers vanish.
    time_reversal
        Chern numbers vanish, with spin or without.
    inversion
        Its operator; None without.
    group
        Operations as tested on H, that planes made equivalent need not be followed twice.
    """

    bloch: BlochSum
    periodic: tuple[bool, bool, bool]
    kramers: bool
    time_reversal: bool
    inversion: InversionOperator | None
    group: GroupTest | None = None


def open_fillings(mesh_energies: FloatArray, filling: int, *, kramers: bool) -> tuple[int, ...]:
    """Numbers of bands below a filling with an open gap on the mesh, the widest gap first.

    Parameters
    ----------
    mesh_energies
        (n_1, n_2, n_3, n_orb) eV.
    filling
        Occupied bands of the case.
    kramers
        Odd numbers cannot have a gap at the TRIM.
    """
    steps = range(2, filling, 2) if kramers else range(1, filling)
    gaps = {n: float((mesh_energies[..., n] - mesh_energies[..., n - 1]).min()) for n in steps}
    return tuple(sorted((n for n in gaps if gaps[n] >= UNRESOLVED_EV), key=lambda n: -gaps[n]))


def compute_lower_groups(
    ground: Ground,
    mesh_energies: FloatArray,
    filling: int,
    asked: Sequence[int] | None,
    criteria: SheetCriteria = PLANE_BUDGET,
) -> LowerGroups:
    """Indices of the lowest bands up to every lower gap, or up to those that are asked for.

    Parameters
    ----------
    ground
        The case.
    mesh_energies
        (n_1, n_2, n_3, n_orb) eV, the mesh of the main gap.
    filling
        Occupied bands of the case.
    asked
        Numbers of bands; None for all below the filling that are open on the mesh.
    criteria
        For each plane.

    Raises
    ------
    ValueError
        A number is not below the number of bands.
    """
    found = open_fillings(mesh_energies, filling, kramers=ground.kramers)
    chosen = found[:MOST_GROUPS] if asked is None else tuple(dict.fromkeys(asked))
    wrong = [n for n in chosen if not 0 < n < ground.bloch.n_orb]
    if wrong:
        raise ValueError(f"no gap above {wrong[0]} of {ground.bloch.n_orb} bands")
    groups = tuple(_group(ground, mesh_energies, n, criteria) for n in sorted(chosen))
    return LowerGroups(
        groups=groups,
        n_closed=len(range(1, filling)) - len(found),
        not_looked_at=tuple(sorted(found[MOST_GROUPS:])) if asked is None else (),
    )


def _group(
    ground: Ground, mesh_energies: FloatArray, n: int, criteria: SheetCriteria
) -> LowerGroup:
    gap = sample_gap(ground.bloch, mesh_energies, n)
    if gap.status in ("gapless", "unresolved"):
        reason = f"the direct gap comes down to {1000 * gap.direct_ev:.2g} meV"
        return _entry(n, gap, "closed" if gap.status == "gapless" else "unresolved", reason)
    parity = None
    if ground.inversion is not None:
        parity = compute_parity(
            ground.bloch, ground.inversion, n, ground.periodic, kramers=ground.kramers
        )
    parity_z2 = None if parity is None or parity.status != "ok" else parity.z2
    z4 = None if parity is None or parity.status != "ok" else parity.z4
    if not ground.kramers:
        return _without_kramers(ground, n, gap, criteria)
    wilson = compute_wilson(
        ground.bloch,
        n,
        ground.periodic,
        time_reversal=True,
        spinful=True,
        criteria=criteria,
        equivalent=equivalent_planes(
            invariant_planes(ground.periodic), ground.group, gap.direct_ev
        ),
    )
    status, reason = wilson.status, wilson.reason
    if None not in (parity_z2, wilson.z2) and parity_z2 != wilson.z2:
        status, reason = "disagree", "parities and Wilson loops give different indices"
    elif status == "failed":
        status = "unresolved"
    return _entry(n, gap, status, reason, parity_z2, z4, wilson.z2, n_solves=wilson.n_solves)


def _without_kramers(ground: Ground, n: int, gap: GapSample, criteria: SheetCriteria) -> LowerGroup:
    """Chern numbers; with time reversal and without spin they vanish and nothing else is asked."""
    if ground.time_reversal:
        zero = (0,) * (3 if all(ground.periodic) else 1)
        return _entry(n, gap, "ok", "", chern=zero)
    found = compute_chern(ground.bloch, n, ground.periodic, criteria)
    status = "ok" if found.status == "ok" else "unresolved"
    return _entry(n, gap, status, found.reason, chern=found.chern, n_solves=found.n_solves)


def _entry(
    n: int,
    gap: GapSample,
    status: str,
    reason: str,
    parity_z2: tuple[int, ...] | None = None,
    z4: int | None = None,
    wilson_z2: tuple[int, ...] | None = None,
    *,
    chern: tuple[int, ...] | None = None,
    n_solves: int = 0,
) -> LowerGroup:
    x, y, z = (float(c) for c in np.asarray(gap.direct_k))
    return LowerGroup(
        filling=n,
        direct_gap_ev=gap.direct_ev,
        direct_k=(x, y, z),
        indirect_gap_ev=gap.indirect_ev,
        status=status,
        reason=reason,
        parity_z2=parity_z2,
        z4=z4,
        wilson_z2=wilson_z2,
        chern=chern,
        n_solves=n_solves + gap.n_solves,
    )
