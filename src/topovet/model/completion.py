"""Repeated and missing R vectors of a file, set right before weights and shifts are applied.

Neither happens to a sound file; the audit counts both, and flags say so. What is done here is the
reading that loses nothing: a block repeated to the last bit counts once, and an R whose -R is not
listed supplies it by Hermiticity.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from topovet.arrays import BoolArray, IntArray
from topovet.intake.lattice_keys import first_rows_of
from topovet.intake.records import HamiltonianFile, WsShifts


def complete(
    hamiltonian: HamiltonianFile, shifts: WsShifts | None
) -> tuple[HamiltonianFile, WsShifts | None]:
    """A Hamiltonian closed under R -> -R and without identical repeats; shifts to match.

    Conflicting repeats are left as they are: the Fourier sum adds them, and the verdict is flagged.
    A sound file is returned as it is, without a copy.
    """
    kept = _without_identical_repeats(hamiltonian)
    if not kept.all():
        hamiltonian, shifts = _select(hamiltonian, shifts, np.nonzero(kept)[0])
    lonely = np.nonzero(first_rows_of(hamiltonian.r_cells, -hamiltonian.r_cells) < 0)[0]
    if len(lonely):
        hamiltonian, shifts = _add_partners(hamiltonian, shifts, lonely)
    return hamiltonian, shifts


def _without_identical_repeats(hamiltonian: HamiltonianFile) -> BoolArray:
    first = first_rows_of(hamiltonian.r_cells, hamiltonian.r_cells)
    kept: BoolArray = first == np.arange(len(first))
    for r in np.nonzero(~kept)[0]:
        same = np.array_equal(hamiltonian.h_r[r], hamiltonian.h_r[first[r]])
        kept[r] = not (same and hamiltonian.degeneracies[r] == hamiltonian.degeneracies[first[r]])
    return kept


def _select(
    hamiltonian: HamiltonianFile, shifts: WsShifts | None, rows: IntArray
) -> tuple[HamiltonianFile, WsShifts | None]:
    chosen = replace(
        hamiltonian,
        degeneracies=hamiltonian.degeneracies[rows],
        r_cells=hamiltonian.r_cells[rows],
        h_r=hamiltonian.h_r[rows],
    )
    if shifts is None:
        return chosen, None
    parts = _shifts_by_r(shifts)
    return chosen, WsShifts(
        shifts.r_cells[rows], shifts.counts[rows], np.concatenate([parts[r] for r in rows])
    )


def _add_partners(
    hamiltonian: HamiltonianFile, shifts: WsShifts | None, lonely: IntArray
) -> tuple[HamiltonianFile, WsShifts | None]:
    partners = hamiltonian.h_r[lonely].conj().transpose(0, 2, 1)
    completed = replace(
        hamiltonian,
        degeneracies=np.concatenate([hamiltonian.degeneracies, hamiltonian.degeneracies[lonely]]),
        r_cells=np.concatenate([hamiltonian.r_cells, -hamiltonian.r_cells[lonely]]),
        h_r=np.concatenate([hamiltonian.h_r, partners]),
    )
    if shifts is None:
        return completed, None
    added = [_reversed(shifts.counts[r], _shifts_by_r(shifts)[r]) for r in lonely]
    return completed, WsShifts(
        completed.r_cells,
        np.concatenate([shifts.counts, *(counts[None] for counts, _ in added)]),
        np.concatenate([shifts.shifts, *(vectors for _, vectors in added)]),
    )


def _reversed(counts: IntArray, vectors: IntArray) -> tuple[IntArray, IntArray]:
    """Shifts of (-R, n, m) from those of (R, m, n): the opposite vectors, elements transposed."""
    n = len(counts)
    element = np.repeat(np.arange(n * n), counts.reshape(-1))
    transposed = element % n * n + element // n
    return counts.T.copy(), -vectors[np.argsort(transposed, kind="stable")]


def _shifts_by_r(shifts: WsShifts) -> list[IntArray]:
    ends = np.cumsum(shifts.counts.reshape(len(shifts.r_cells), -1).sum(axis=1))
    return np.split(shifts.shifts, ends[:-1])
