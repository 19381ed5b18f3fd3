"""Keys of lattice vectors: one to one, linear, ordered."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from companion_files import hermitian_file
from topovet.errors import InputError
from topovet.intake.audit import audit_hamiltonian
from topovet.intake.lattice_keys import (
    LARGEST_COMPONENT,
    first_rows_of,
    vector_keys,
    vectors_of_keys,
)
from topovet.intake.shifts.ws_shifts import apply_shifts
from topovet.intake.shifts.wsvec import read_wsvec


def test_keys_are_undone_up_to_the_largest_component() -> None:
    extreme = LARGEST_COMPONENT - 1
    vectors = np.array([[extreme, -extreme, extreme], [-extreme, extreme, -extreme], [0, -1, 1]])
    np.testing.assert_array_equal(vectors_of_keys(vector_keys(vectors)), vectors)
    np.testing.assert_array_equal(vectors_of_keys(vector_keys(2 * vectors)), 2 * vectors)


def test_keys_are_linear_and_lexicographic() -> None:
    rng = np.random.default_rng(1)
    u, v = rng.integers(-40, 40, size=(2, 200, 3))
    np.testing.assert_array_equal(vector_keys(u) + vector_keys(v), vector_keys(u + v))
    by_key = u[np.argsort(vector_keys(u), kind="stable")]
    assert by_key.tolist() == sorted(u.tolist())


def test_components_without_a_unique_key_are_refused() -> None:
    with pytest.raises(ValueError, match="below 2\\^20"):
        vector_keys(np.array([[0, 2**20, 0]]))


def test_a_hamiltonian_with_such_components_is_refused_by_all_that_needs_keys(
    tmp_path: Path,
) -> None:
    file = hermitian_file([[0, 0, 0], [2_000_000, 0, 0]], 1)
    wsvec = tmp_path / "GX_wsvec.dat"
    wsvec.write_text("a comment\n")
    for reader in (
        lambda: audit_hamiltonian(file, mp_grid=None, shift_source="none needed", shift_note=""),
        lambda: apply_shifts(file, None),
        lambda: read_wsvec(wsvec, file),
    ):
        with pytest.raises(InputError) as caught:
            reader()
        assert str(caught.value) == (
            "GX_hr.dat: found R = 2000000 0 0, expected lattice vectors with components below "
            "524288; copy the file again or let Wannier90 write it again."
        )


def test_first_rows_finds_the_first_of_duplicates_and_says_where_there_is_none() -> None:
    r_cells = np.array([[0, 0, 1], [0, 0, 0], [0, 0, 1], [-1, 0, 0]])
    wanted = np.array([[0, 0, 1], [5, 5, 5], [-1, 0, 0]])
    assert first_rows_of(r_cells, wanted).tolist() == [0, -1, 3]
    assert first_rows_of(np.empty((0, 3), dtype=np.int64), wanted).tolist() == [-1, -1, -1]
