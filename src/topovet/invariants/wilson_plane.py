"""Z2 of a plane that time reversal maps to itself, from lines on half of it.

Both counting rules of `flow` must agree, the second at several reference values, and the centres at
both ends must come in Kramers pairs. If a budget ends first, or the gap closes, the plane is
"unresolved" and the reason is given.

Why the sum of all steps decides: how often centres cross a reference value, up counted against
down, follows from where they start and end and from the sum of their steps, the Berry flux through
half of the plane. This is Fu and Kane's formula, Phys. Rev. B 74, 195312 (2006),
doi:10.1103/PhysRevB.74.195312.
"""

from __future__ import annotations

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.invariants.flow import (
    crossings,
    distance_to_set,
    kramers_splitting,
    largest_gap_parity,
    largest_gaps,
)
from topovet.invariants.results import WilsonPlane
from topovet.invariants.wilson_line import Reversal
from topovet.invariants.wilson_loop import measure_links
from topovet.invariants.wilson_sheet import Sheet, SheetCriteria
from topovet.model.fourier import BlochSum
from topovet.model.plane import KPlane
from topovet.spectrum.eigen import one_blas_thread
from topovet.spectrum.plane_states import PlaneStates
from topovet.symmetry.time_reversal import spin_operator

N_REFERENCES = 8
"""Evenly spaced reference values, besides the middles of the largest gaps at both ends."""

REFERENCE_CLEARANCE = 0.005
"""A reference closer than this to a centre at either end, where centres must pair, is left out."""

PAIRING_FRACTION = 0.02
"""Largest splitting of Kramers pairs at the ends, as a fraction of the largest gap there."""

REVERSAL_POINTS = np.array([[0.0, 0.29], [0.5, 0.18]])
"""Where time reversal is tried, besides the place of the narrowest gap: half of the lines at 0 and
1/2 rest on it."""

REVERSAL_LOSS = 0.01
"""Largest |1 - M†M| between time-reversed states and those at -k, about (violation / gap)^2. A
smaller violation cannot be told here; the test of H itself is far more sensitive."""


def compute_wilson_plane(
    bloch: BlochSum,
    plane: KPlane,
    filling: int,
    criteria: SheetCriteria | None = None,
    *,
    positions_frac: FloatArray | None = None,
) -> WilsonPlane:
    """Z2 of the occupied bands on a time-reversal-invariant plane.

    Parameters
    ----------
    bloch
        Spinful Hamiltonian with time reversal, spinors interlaced.
    plane
        A plane that contains -k for each of its k.
    filling
        Occupied bands, even.
    criteria
        Convergence criteria and budget.
    positions_frac
        (n_orb, 3) orbital positions: centres are then true positions along the line; by default
        every orbital counts as sitting at the origin of its cell, which moves less.

    Returns
    -------
    WilsonPlane
        status "unresolved" with the reason where the budget ends, the gap closes or the counts
        disagree; the flow found until then is returned all the same.
    """
    with one_blas_thread():
        states = PlaneStates(
            bloch,
            plane,
            filling,
            max_solves=(criteria or SheetCriteria()).max_solves,
            positions_frac=positions_frac,
        )
        reversal = _time_reversal(states, bloch.n_orb)
        sheet = Sheet(states, criteria or SheetCriteria(), reversal=reversal, follow_gap=True)
        reason, loss = sheet.refine(), np.nan
        if not reason:
            loss = _reversal_loss(states, bloch.n_orb)
    if loss > REVERSAL_LOSS:
        reason = f"time reversal does not hold (occupied states at k and -k differ by {loss:.2f})"
    if reason:
        nothing = np.empty(0)
        return _result(sheet, reason, None, nothing, nothing.astype(np.int64), loss)
    hwcc = sheet.hwcc
    references = _references(hwcc)
    counts = crossings(hwcc[:-1], sheet.steps, references)
    return _result(sheet, *_judge(hwcc, references, counts), references, counts, loss)


def _time_reversal(states: PlaneStates, n_orb: int) -> Reversal:
    """Theta = i sigma_y K from (x, y) to (-x, -y), then on by (2x, 1) to (x, 1 - y)."""
    u = spin_operator(n_orb, "interlaced")

    def reversal(across: FloatArray, kets: ComplexArray) -> ComplexArray:
        reversed_kets = u @ kets.conj()
        closing = states.closing(np.stack([2 * across, np.ones(len(across))], axis=1))
        if closing is not None:
            reversed_kets *= closing[:, :, None]
        return np.asarray(reversed_kets)

    return reversal


def _reversal_loss(states: PlaneStates, n_orb: int) -> float:
    """How far time-reversed occupied states are from those solved for at -k."""
    xy = np.concatenate([REVERSAL_POINTS, np.array([states.narrowest()[1]])])
    kets, images = np.split(states.states_at(np.concatenate([xy, -xy])), 2)
    u = spin_operator(n_orb, "interlaced")
    return float(measure_links(u @ kets.conj(), images).losses.max())


def _references(hwcc: FloatArray) -> FloatArray:
    """Values that no centre at either end comes close to."""
    ends = hwcc[[0, -1]]
    even = (np.arange(N_REFERENCES) + 0.5) / N_REFERENCES
    values = np.concatenate([largest_gaps(ends)[0], even])
    return np.asarray(values[distance_to_set(values, ends.reshape(-1)) > REFERENCE_CLEARANCE])


def _judge(hwcc: FloatArray, references: FloatArray, counts: IntArray) -> tuple[str, int | None]:
    """Why the counts cannot be trusted, or empty, and Z2."""
    for end in (hwcc[0], hwcc[-1]):
        split, gap = kramers_splitting(end), float(largest_gaps(end[None])[1][0])
        if split > PAIRING_FRACTION * gap:
            return (
                f"centres at an end of the plane do not come in Kramers pairs (split by "
                f"{split:.3f}, largest gap {gap:.3f}): time reversal does not hold"
            ), None
    by_gap, by_reference = largest_gap_parity(hwcc), set((counts % 2).tolist())
    if len(references) < 2 or by_reference != {by_gap}:
        shown = ", ".join(f"{c} at {r:.3f}" for r, c in zip(references, counts, strict=True))
        return f"the counts disagree: largest gap {by_gap}, crossings of references {shown}", None
    return "", by_gap


def _result(
    sheet: Sheet,
    reason: str,
    z2: int | None,
    references: FloatArray,
    counts: IntArray,
    reversal_loss: float,
) -> WilsonPlane:
    hwcc, lines = sheet.hwcc, sheet.lines
    middle, width = largest_gaps(hwcc) if lines else (np.empty(0), np.empty(0))
    gap, narrowest_k = sheet.narrowest_k()
    return WilsonPlane(
        plane=sheet.states.plane.name,
        across=sheet.states.plane.across,
        along=sheet.states.plane.along,
        status="unresolved" if reason else "ok",
        reason=reason,
        z2=z2,
        lines=len(lines),
        points_per_line=max((line.n_points for line in lines), default=0),
        smallest_gap=float(width.min(initial=1.0)),
        smallest_singular_value=min((line.smallest_singular_value for line in lines), default=0.0),
        smallest_direct_gap_ev=gap,
        narrowest_k=narrowest_k,
        kramers_splitting=max((kramers_splitting(h) for h in hwcc[[0, -1]]), default=0.0)
        if lines
        else 0.0,
        n_solves=sheet.states.n_solves,
        flow_across=sheet.across,
        flow_hwcc=hwcc,
        gap_centres=middle,
        references=references,
        crossings=counts,
        reversal_loss=reversal_loss,
    )
