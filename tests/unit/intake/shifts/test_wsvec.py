"""`_wsvec.dat`: read by labels, in any order, in chunks of any size."""

from __future__ import annotations

import gzip
from pathlib import Path

import numpy as np
import pytest

import topovet.intake.shifts.integer_lines as integer_lines
from companion_files import HEADER, Refusal, hermitian_file, mesh_cells, records_of, wsvec_text
from topovet.intake.records import HamiltonianFile, WsShifts
from topovet.intake.shifts.ws_shifts import rebuild_shifts
from topovet.intake.shifts.wsvec import read_wsvec

MESH = (3, 2, 2)
CENTRES = np.array([[0.0, 0, 0], [0.5, 0, 0.5]])
TODO = (
    "copy the file of the same Wannier90 run again, or remove it to have the shifts rebuilt "
    "from the centres"
)


@pytest.fixture
def hamiltonian() -> HamiltonianFile:
    return hermitian_file(mesh_cells(MESH).tolist(), 2)


@pytest.fixture
def shifts(hamiltonian: HamiltonianFile) -> WsShifts:
    return rebuild_shifts(hamiltonian.r_cells, CENTRES, MESH, np.diag([3.0, 4, 5]))


@pytest.fixture
def refusal(tmp_path: Path) -> Refusal:
    return Refusal(tmp_path)


def assert_same(found: WsShifts, expected: WsShifts) -> None:
    np.testing.assert_array_equal(found.r_cells, expected.r_cells)
    np.testing.assert_array_equal(found.counts, expected.counts)
    np.testing.assert_array_equal(found.shifts, expected.shifts)
    assert found.shifts.dtype == np.int64


def test_the_shifts_come_back(
    tmp_path: Path, hamiltonian: HamiltonianFile, shifts: WsShifts
) -> None:
    assert shifts.counts.max() > 1
    path = tmp_path / "GX_wsvec.dat.gz"
    path.write_bytes(gzip.compress(wsvec_text(shifts).encode()))
    assert_same(read_wsvec(path, hamiltonian, mp_grid=MESH), shifts)


@pytest.mark.parametrize("chunk", [60, 97, 1000])
def test_chunks_may_end_anywhere(
    tmp_path: Path,
    hamiltonian: HamiltonianFile,
    shifts: WsShifts,
    monkeypatch: pytest.MonkeyPatch,
    chunk: int,
) -> None:
    monkeypatch.setattr(integer_lines, "CHUNK_BYTES", chunk)
    path = tmp_path / "GX_wsvec.dat"
    path.write_text(wsvec_text(shifts))
    assert_same(read_wsvec(path, hamiltonian), shifts)


def test_records_are_matched_by_their_labels(
    tmp_path: Path, hamiltonian: HamiltonianFile, shifts: WsShifts
) -> None:
    records = list(records_of(shifts))
    order = np.random.default_rng(5).permutation(len(records))
    lines = [HEADER, *(line for i in order for line in records[i])]
    path = tmp_path / "GX_wsvec.dat"
    # other widths, other line ends, no last one, blank lines at the end
    path.write_text("\r\n".join(" ".join(line.split()) for line in lines) + "\r\n\r\n ")
    header_fixed = path.read_text().replace(" ".join(HEADER.split()), HEADER)
    path.write_text(header_fixed)
    assert_same(read_wsvec(path, hamiltonian), shifts)


def test_an_r_that_the_hamiltonian_lists_twice_gets_the_same_shifts(
    tmp_path: Path, hamiltonian: HamiltonianFile, shifts: WsShifts
) -> None:
    path = tmp_path / "GX_wsvec.dat"
    path.write_text(wsvec_text(shifts))
    twice = hermitian_file([*hamiltonian.r_cells.tolist(), hamiltonian.r_cells[3].tolist()], 2)
    found = read_wsvec(path, twice)
    assert_same(found, rebuild_shifts(twice.r_cells, CENTRES, MESH, np.diag([3.0, 4, 5])))


def edited(text: str, edit: tuple[int, str | None]) -> str:
    """The text with one line (1-based) replaced, or dropped where the edit is None."""
    lines = text.splitlines()
    number, new = edit
    lines[number - 1 : number] = [] if new is None else new.split("\n")
    return "\n".join(lines) + "\n"


# The first record of the file: line 2 its labels -1 -1 -1 1 1, line 3 the count 4, lines 4 to 7.
EDITS = [
    ((2, None), 2, '"4"', "R1 R2 R3 m n"),
    ((2, "-1 -1 -1 1"), 2, '"-1 -1 -1 1"', "R1 R2 R3 m n"),
    ((3, None), 3, '"0 0 0"', "a count from 1 to 125"),
    ((3, "5"), 8, '"-1 -1 -1 1 2"', "shift 5 of 5"),
    ((3, "3"), 7, '"0 2 2"', "R1 R2 R3 m n"),
    ((3, "0"), 3, '"0"', "a count from 1 to 125"),
    ((3, "-4"), 3, '"-4"', "a count from 1 to 125"),
    ((3, "999"), 3, '"999"', "a count from 1 to 125"),
    ((5, "0 0 2 0"), 5, '"0 0 2 0"', "three integers"),
    ((5, "0 0"), 5, '"0 0"', "three integers"),
    ((5, None), 7, '"-1 -1 -1 1 2"', "shift 4 of 4"),
    ((5, "0 0 *"), 5, '"0 0 *"', "integers only: R1 R2 R3 m n, a count, or a shift"),
    ((5, "0 0 1"), 5, "the shift 0 0 1", "a vector of the 3 x 2 x 2 supercell"),
    ((5, "0 0 0"), 5, "the shift 0 0 0", "shifts that differ"),
    ((5, "0 0 524288"), 5, "the shift 0 0 524288", "a smaller shift"),
    ((2, "-1 -1 -1 1 3"), 2, "R1 R2 R3 m n = -1 -1 -1 1 3", "m and n from 1 to 2"),
    ((2, "-1 -1 -1 0 1"), 2, "R1 R2 R3 m n = -1 -1 -1 0 1", "m and n from 1 to 2"),
    ((2, "7 -1 -1 1 1"), 2, "R1 R2 R3 m n = 7 -1 -1 1 1", "an R that GX_hr.dat lists"),
    ((2, "-1 -1 -1 1 2"), 8, "R1 R2 R3 m n = -1 -1 -1 1 2", "each R, m, n once"),
]


@pytest.mark.parametrize(("edit", "line", "found", "expected"), EDITS)
@pytest.mark.parametrize("chunk", [60, 2**22])
def test_damage_is_named(
    tmp_path: Path,
    hamiltonian: HamiltonianFile,
    shifts: WsShifts,
    refusal: Refusal,
    monkeypatch: pytest.MonkeyPatch,
    chunk: int,
    edit: tuple[int, str | None],
    line: int,
    found: str,
    expected: str,
) -> None:
    monkeypatch.setattr(integer_lines, "CHUNK_BYTES", chunk)
    path = tmp_path / "GX_wsvec.dat"
    path.write_text(edited(wsvec_text(shifts), edit))
    message = refusal.of(read_wsvec, path, hamiltonian, mp_grid=MESH)
    assert message == f"GX_wsvec.dat, line {line}: found {found}, expected {expected}; {TODO}."


@pytest.mark.parametrize("chunk", [60, 2**22])
@pytest.mark.parametrize("n_shifts", [126, 500])
def test_a_record_without_a_reasonable_end_is_not_waited_for(
    tmp_path: Path,
    hamiltonian: HamiltonianFile,
    refusal: Refusal,
    monkeypatch: pytest.MonkeyPatch,
    n_shifts: int,
    chunk: int,
) -> None:
    monkeypatch.setattr(integer_lines, "CHUNK_BYTES", chunk)
    lines = [HEADER, "0 0 0 1 1", str(n_shifts), *(f"{3 * i} 0 0" for i in range(n_shifts))]
    path = tmp_path / "GX_wsvec.dat"
    path.write_text("\n".join(lines) + "\n")
    assert refusal.of(read_wsvec, path, hamiltonian) == (
        f'GX_wsvec.dat, line 3: found "{n_shifts}", expected a count from 1 to 125; {TODO}.'
    )


def test_a_file_cut_anywhere_is_refused_with_a_line(
    tmp_path: Path, hamiltonian: HamiltonianFile, shifts: WsShifts, refusal: Refusal
) -> None:
    path = tmp_path / "GX_wsvec.dat"
    lines = wsvec_text(shifts).splitlines(keepends=True)
    for stop in range(1, len(lines)):
        path.write_text("".join(lines[:stop]))
        assert refusal.of(read_wsvec, path, hamiltonian).startswith(f"GX_wsvec.dat, line {stop}: ")
