"""Chern numbers of the occupied bands: winding of the hybrid Wannier centres, and Berry flux.

For a plane swept across x with loops along y, A = i <u|du> and the flux F = dA_y/dx - dA_x/dy,

    C = (1/2 pi) integral F dx dy = change of the sum of hybrid Wannier centres over one sweep.

The sum of centres is taken from the loops' eigenvalues and its change from line to line modulo 1,
nearest to zero; the flux from plaquettes between the lines (Fukui, Hatsugai, Suzuki, J. Phys. Soc.
Jpn. 74, 1674 (2005), doi:10.1143/JPSJ.74.1674). In every strip, and in total, both must agree. For
the lower band of H = d.sigma this C is (1/4 pi) integral of n.(dn/dx x dn/dy), n = d/|d|.
"""

from __future__ import annotations

import numpy as np

from topovet.invariants.results import ChernPlane, ChernWitness
from topovet.invariants.wilson_sheet import Sheet, SheetCriteria
from topovet.model.fourier import BlochSum
from topovet.model.plane import KPlane, coordinate_plane
from topovet.spectrum.eigen import map_threads, one_blas_thread
from topovet.spectrum.plane_states import PlaneStates, Subspace

OFFSETS = (0.0, 0.5, 0.17, 0.71)
"""Planes on which each component of the Chern vector is taken in 3D: two that a crystal's symmetry
often picks out, two that it does not."""


def compute_chern_plane(
    bloch: BlochSum,
    plane: KPlane,
    filling: int,
    criteria: SheetCriteria | None = None,
    *,
    subspace: Subspace | None = None,
) -> ChernPlane:
    """Chern number of a plane of k.

    Parameters
    ----------
    bloch
        Any Hermitian Hamiltonian.
    plane
        Where; the sign of the result belongs to its orientation (across, along).
    filling
        Occupied bands.
    criteria
        Convergence criteria and budget.
    subspace
        Part of the occupied space that is meant, see `topovet.spectrum.plane_states.PlaneStates`.

    Returns
    -------
    ChernPlane
        status "unresolved" with the reason where the gap closes, the budget ends or the two
        counts differ.
    """
    criteria = criteria or SheetCriteria()
    with one_blas_thread():
        states = PlaneStates(
            bloch, plane, filling, max_solves=criteria.max_solves, subspace=subspace
        )
        sheet = Sheet(states, criteria, reversal=None, follow_gap=False)
        reason = sheet.refine()
    if reason:
        return _result(sheet, reason, None, None, np.inf)
    flux = np.array([strip.turns for strip in sheet.fluxes])
    steps = np.diff(sheet.hwcc.sum(axis=1))
    steps -= np.round(steps)
    winding, plaquettes = round(steps.sum()), round(flux.sum())
    if winding != plaquettes or np.abs(steps - flux).max() > 1e-6:
        reason = (
            f"the counts disagree: winding of the centres {winding}, Berry flux {plaquettes}, "
            f"largest difference in a strip {np.abs(steps - flux).max():.2g}"
        )
    return _result(sheet, reason, winding, plaquettes, max(strip.largest for strip in sheet.fluxes))


def compute_chern(
    bloch: BlochSum,
    filling: int,
    periodic: tuple[bool, bool, bool],
    criteria: SheetCriteria | None = None,
    *,
    offsets: tuple[float, ...] = OFFSETS,
) -> ChernWitness:
    """Chern number in 2D, Chern vector in 3D.

    Parameters
    ----------
    bloch, filling, criteria
        See `compute_chern_plane`; the budget is that of each plane.
    periodic
        Periodic directions, three or two.
    offsets
        Values of k_i of the parallel planes in 3D, fractional; all must give the same number.
    """
    if not 0 < filling < bloch.n_orb:
        reason = f"filling {filling} leaves no gap among {bloch.n_orb} bands"
        return ChernWitness("failed", reason, None, (), (), 0)
    axes = range(3) if all(periodic) else [periodic.index(False)]
    at = [(axis, offset) for axis in axes for offset in (offsets if all(periodic) else (0.0,))]
    planes = map_threads(
        lambda where: compute_chern_plane(bloch, coordinate_plane(*where), filling, criteria), at
    )
    by_direction = tuple(
        tuple((where[1], p.chern) for where, p in zip(at, planes, strict=True) if where[0] == axis)
        for axis in axes
    )
    status, reason = _compare(planes, by_direction)
    chern = tuple(c for ((_, c), *_) in by_direction if c is not None) if not reason else None
    n_solves = sum(plane.n_solves for plane in planes)
    return ChernWitness(status, reason, chern, by_direction, tuple(planes), n_solves)


def _compare(
    planes: list[ChernPlane], by_direction: tuple[tuple[tuple[float, int | None], ...], ...]
) -> tuple[str, str]:
    """Status and reason: parallel planes must agree, and all must be resolved."""
    for i, found in enumerate(by_direction):
        known = [(offset, chern) for offset, chern in found if chern is not None]
        if len({chern for _, chern in known}) > 1:
            shown = ", ".join(f"{chern} at {offset:g}" for offset, chern in known)
            return "failed", (
                f"the Chern number of planes k{i + 1} = const changes ({shown}): "
                "the gap closes between them"
            )
    unsolved = [plane for plane in planes if plane.chern is None]
    if unsolved:
        return "unresolved", "; ".join(f"plane {p.plane}: {p.reason}" for p in unsolved)
    return "ok", ""


def _result(
    sheet: Sheet,
    reason: str,
    winding: int | None,
    plaquettes: int | None,
    largest_flux: float,
) -> ChernPlane:
    plane, lines = sheet.states.plane, sheet.lines
    gap, narrowest_k = sheet.narrowest_k()
    return ChernPlane(
        plane=plane.name,
        across=plane.across,
        along=plane.along,
        status="unresolved" if reason else "ok",
        reason=reason,
        chern=None if reason else winding,
        winding=winding,
        plaquettes=plaquettes,
        largest_flux=largest_flux,
        lines=len(lines),
        points_per_line=max((line.n_points for line in lines), default=0),
        smallest_singular_value=min((line.smallest_singular_value for line in lines), default=0.0),
        smallest_direct_gap_ev=gap,
        narrowest_k=narrowest_k,
        n_solves=sheet.states.n_solves,
        flow_across=sheet.across,
        flow_hwcc=sheet.hwcc,
    )
