"""The intake audit: every defect shows in its own number, and only there."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from companion_files import hermitian_file, mesh_cells
from topovet.arrays import ComplexArray
from topovet.intake.audit import audit_hamiltonian
from topovet.intake.audit_results import HamiltonianAudit
from topovet.intake.records import HamiltonianFile


@pytest.fixture
def sound() -> HamiltonianFile:
    return hermitian_file(mesh_cells((3, 3, 3)).tolist(), 3)


def audit(file: HamiltonianFile) -> HamiltonianAudit:
    return audit_hamiltonian(
        file, mp_grid=(3, 3, 3), shift_source="none needed", shift_note="By hand."
    )


def row_of(file: HamiltonianFile, r: tuple[int, int, int]) -> int:
    return file.r_cells.tolist().index(list(r))


def keep(file: HamiltonianFile, rows: list[int]) -> HamiltonianFile:
    return replace(
        file,
        degeneracies=file.degeneracies[rows],
        r_cells=file.r_cells[rows],
        h_r=file.h_r[rows],
    )


def test_a_sound_file(sound: HamiltonianFile) -> None:
    found = audit(sound)
    assert (found.n_wann, found.n_r, found.mesh_points) == (3, 27, 27)
    assert found.degeneracy_sum == pytest.approx(27)
    assert found.hermiticity_mev == 0.0
    assert found.duplicate_r == found.missing_partner_r == ()
    assert found.duplicates_identical
    assert (found.n_missing_partner, found.missing_partner_mev) == (0, 0.0)
    assert (found.shift_source, found.shift_note) == ("none needed", "By hand.")
    assert found.centre_offsets_ang == ()


def test_hermiticity_is_a_spectral_norm_largest_over_r(sound: HamiltonianFile) -> None:
    sound.h_r[row_of(sound, (1, 0, 0))] += 0.001 * np.eye(3)
    wrong = np.zeros((3, 3))
    wrong[0, 1] = wrong[1, 0] = 0.004  # norm 0.004, Frobenius norm 0.0057
    sound.h_r[row_of(sound, (1, 1, 0))] += wrong
    sound.h_r[row_of(sound, (0, 0, 1))] += 0.003 * np.ones((3, 3)) / np.sqrt(3)
    assert audit(sound).hermiticity_mev == pytest.approx(0.003e3 * np.sqrt(3))


def test_degeneracies_that_differ_break_hermiticity(sound: HamiltonianFile) -> None:
    row = row_of(sound, (1, 0, 0))
    sound.degeneracies[row] = 2
    norm = np.linalg.norm(sound.h_r[row], 2)
    assert audit(sound).hermiticity_mev == pytest.approx(1e3 * norm)
    assert audit(sound).degeneracy_sum == pytest.approx(26.5)


def test_onsite_block_that_is_not_hermitian(sound: HamiltonianFile) -> None:
    sound.h_r[row_of(sound, (0, 0, 0)), 1, 1] += 0.002j
    assert audit(sound).hermiticity_mev == pytest.approx(4.0)


@pytest.mark.parametrize("change", [0.0, 1e-6])
def test_duplicates(sound: HamiltonianFile, change: float) -> None:
    row = row_of(sound, (0, 1, -1))
    twice = keep(sound, [*range(27), row, row])
    twice.h_r[-1, 0, 0] += change
    found = audit(twice)
    assert found.duplicate_r == ((0, 1, -1),)
    assert found.duplicates_identical is (change == 0.0)
    assert found.hermiticity_mev == 0.0


def test_missing_partners(sound: HamiltonianFile) -> None:
    gone = {row_of(sound, (1, 0, 0)), row_of(sound, (1, 1, 1))}
    cut = keep(sound, [i for i in range(27) if i not in gone])
    found = audit(cut)
    assert found.missing_partner_r == ((-1, -1, -1), (-1, 0, 0))
    assert found.n_missing_partner == 2
    largest = max(np.abs(cut.h_r[row_of(cut, r)]).max() for r in ((-1, -1, -1), (-1, 0, 0)))
    assert found.missing_partner_mev == pytest.approx(1e3 * largest)


def test_blocks_of_zeros_beside_the_weakest_that_is_none(sound: HamiltonianFile) -> None:
    assert audit(sound).n_zero_r == 0
    sound.h_r[row_of(sound, (1, 1, 1))] = 0.0
    sound.h_r[row_of(sound, (-1, -1, -1))] = 0.0
    sound.h_r[row_of(sound, (1, 0, 0))] = 0.0
    sound.h_r[row_of(sound, (1, 0, 0)), 0, 2] = 0.0004j
    found = audit(sound)
    assert found.n_zero_r == 2
    assert found.weakest_block_mev == pytest.approx(0.4)
    assert found.last_digit_mev == pytest.approx(0.001)


def test_file_of_zeros_has_no_weakest_block(sound: HamiltonianFile) -> None:
    sound.h_r[:] = 0.0
    found = audit(sound)
    assert (found.n_zero_r, found.weakest_block_mev) == (27, 0.0)


def test_exponent_form_has_no_last_digit(sound: HamiltonianFile) -> None:
    assert audit(replace(sound, decimals=None)).last_digit_mev == 0.0


def test_at_most_ten_vectors_are_named() -> None:
    line = hermitian_file([[i, 0, 0] for i in range(30)] * 2, 1)
    found = audit(line)
    assert len(found.missing_partner_r) == len(found.duplicate_r) == 10
    assert found.n_missing_partner == 58


def test_onsite_scale_does_not_depend_on_the_zero_of_energy(sound: HamiltonianFile) -> None:
    row = row_of(sound, (0, 0, 0))
    sound.h_r[row] = np.diag([1.0, 2.0, 6.0])
    assert audit(sound).onsite_scale_ev == pytest.approx(3.0)
    sound.h_r[row] += 100 * np.eye(3)
    assert audit(sound).onsite_scale_ev == pytest.approx(3.0)


def test_rounding_covers_what_rounding_does_to_h_of_k() -> None:
    """The stated error against the real one: the same H(R) written with 6 and with 3 decimals."""
    exact = hermitian_file(mesh_cells((5, 5, 5)).tolist(), 8, decimals=9)
    rounded: ComplexArray = exact.h_r.round(3)
    k_frac = np.random.default_rng(2).random((50, 3))
    phases = np.exp(2j * np.pi * (k_frac @ exact.r_cells.T))
    error = np.einsum("kr,rmn->kmn", phases, rounded - exact.h_r)
    worst = 1e3 * np.linalg.norm(error, 2, axis=(1, 2)).max()
    stated = audit(replace(exact, h_r=rounded, decimals=3)).rounding_mev
    assert worst < stated < 10 * worst
    assert audit(replace(exact, decimals=None)).rounding_mev == 0.0


def test_unknown_companions_leave_their_numbers_empty(sound: HamiltonianFile) -> None:
    found = audit_hamiltonian(
        sound,
        mp_grid=None,
        shift_source="not available",
        shift_note="",
        centre_offsets=np.array([0.1, 0.2, 0.0]),
    )
    assert found.mesh_points is None
    assert found.centre_offsets_ang == (0.1, 0.2, 0.0)


def test_a_file_without_the_origin_or_with_nothing_else(sound: HamiltonianFile) -> None:
    row = row_of(sound, (0, 0, 0))
    without = audit(keep(sound, [i for i in range(27) if i != row]))
    assert without.onsite_scale_ev == 0.0
    alone = audit(keep(sound, [row]))
    assert alone.n_missing_partner == 0
