"""Files in block spin order, brought to the interlaced order that everything else expects."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from topovet.arrays import IntArray
from topovet.intake.records import HamiltonianFile, WsShifts


def interlacing_order(n_wann: int) -> IntArray:
    """Index that turns block order into interlaced order: new[i] = old[order[i]]."""
    return np.asarray(np.arange(n_wann).reshape(2, -1).T.reshape(-1))


def reorder_hamiltonian(hamiltonian: HamiltonianFile, order: IntArray) -> HamiltonianFile:
    """The same H(R) with its Wannier functions in another order: new[i] = old[order[i]]."""
    centres = hamiltonian.centres_cart
    return replace(
        hamiltonian,
        h_r=np.ascontiguousarray(hamiltonian.h_r[:, order[:, None], order]),
        centres_cart=None if centres is None else centres[order],
    )


def reorder_shifts(shifts: WsShifts, order: IntArray) -> WsShifts:
    """The same shifts for Wannier functions in another order."""
    n_r, n_wann = shifts.counts.shape[:2]
    new_to_old = order[:, None] * n_wann + order
    element = (np.arange(n_r)[:, None, None] * n_wann**2 + new_to_old).reshape(-1)
    counts = shifts.counts.reshape(-1)
    starts = np.cumsum(counts) - counts
    taken = counts[element]
    within = np.arange(taken.sum()) - np.repeat(np.cumsum(taken) - taken, taken)
    rows = np.repeat(starts[element], taken) + within
    return WsShifts(shifts.r_cells, taken.reshape(shifts.counts.shape), shifts.shifts[rows])
