"""Repeated and missing R vectors set right before weights and shifts are applied."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from topovet.arrays import IntArray
from topovet.intake.records import HamiltonianFile, WsShifts
from topovet.intake.shifts.ws_shifts import apply_shifts, rebuild_shifts
from topovet.model.completion import complete
from topovet.model.hamiltonian import TightBindingModel, build_model

CELL = np.diag([3.0, 4.0, 5.0])
CENTRES = np.array([[0, 0, 0], [0.4, 0.5, 0.1]])


def _hermitian_file() -> HamiltonianFile:
    rng = np.random.default_rng(7)
    grid = np.array([[i, j, k] for i in (-1, 0, 1) for j in (-1, 0, 1) for k in (-1, 0, 1)])
    h = rng.normal(size=(27, 2, 2)) + 1j * rng.normal(size=(27, 2, 2))
    h = h + h[::-1].conj().transpose(0, 2, 1)
    degeneracies = rng.integers(1, 4, 27)
    degeneracies = np.minimum(degeneracies, degeneracies[::-1])
    return HamiltonianFile("x", "", degeneracies, grid, h, 6, "tolerant")


SOUND = _hermitian_file()
SHIFTS = rebuild_shifts(SOUND.r_cells, CENTRES, (3, 3, 3), CELL)


def _rows(rows: IntArray) -> tuple[HamiltonianFile, WsShifts]:
    """The file and its shifts with the rows taken."""
    parts = np.split(SHIFTS.shifts, np.cumsum(SHIFTS.counts.reshape(27, -1).sum(axis=1))[:-1])
    shifts = WsShifts(
        SHIFTS.r_cells[rows], SHIFTS.counts[rows], np.concatenate([parts[r] for r in rows])
    )
    taken = replace(
        SOUND,
        r_cells=SOUND.r_cells[rows],
        h_r=SOUND.h_r[rows],
        degeneracies=SOUND.degeneracies[rows],
    )
    return taken, shifts


def _model(hamiltonian: HamiltonianFile, shifts: WsShifts | None) -> TightBindingModel:
    return build_model(*apply_shifts(*complete(hamiltonian, shifts)), spinful=False)


def test_sound_file_is_returned_as_it_is() -> None:
    hamiltonian, shifts = complete(SOUND, SHIFTS)
    assert hamiltonian is SOUND
    assert shifts is SHIFTS


def test_missing_partners_are_supplied_exactly() -> None:
    lost = np.delete(np.arange(27), [3, 20])
    for shifts in (None, _rows(lost)[1]):
        reference = _model(SOUND, None if shifts is None else SHIFTS)
        mended = _model(_rows(lost)[0], shifts)
        np.testing.assert_array_equal(mended.r_cells, reference.r_cells)
        np.testing.assert_allclose(mended.h_r, reference.h_r, atol=1e-15)


def test_identical_repeat_counts_once() -> None:
    repeated = np.concatenate([np.arange(27), [5, 5, 11]])
    hamiltonian, shifts = _rows(repeated)
    np.testing.assert_array_equal(_model(hamiltonian, shifts).h_r, _model(SOUND, SHIFTS).h_r)


def test_conflicting_repeat_is_kept_for_the_flag_to_see() -> None:
    hamiltonian, _ = _rows(np.concatenate([np.arange(27), [5]]))
    h = hamiltonian.h_r.copy()
    h[-1] *= 2
    completed, _ = complete(replace(hamiltonian, h_r=h), None)
    assert len(completed.r_cells) == 28
