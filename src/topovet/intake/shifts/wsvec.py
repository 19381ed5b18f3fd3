"""`_wsvec.dat`: the Wigner-Seitz shifts that Wannier90 wrote beside an `_hr.dat`."""

from __future__ import annotations

from pathlib import Path
from typing import NoReturn

import numpy as np
from numpy.typing import NDArray

from topovet.arrays import BoolArray, IntArray
from topovet.errors import InputError
from topovet.intake.lattice_keys import (
    LARGEST_COMPONENT,
    check_lattice_vectors,
    first_rows_of,
    vector_keys,
)
from topovet.intake.opening import open_bytes
from topovet.intake.records import HamiltonianFile, WsShifts
from topovet.intake.shifts.integer_lines import integer_lines
from topovet.intake.shifts.wsvec_records import AGAIN, WsRecords, ws_records

_INTEGERS = "integers only: R1 R2 R3 m n, a count, or a shift"


def read_wsvec(
    path: str | Path,
    hamiltonian: HamiltonianFile,
    *,
    mp_grid: tuple[int, int, int] | None = None,
) -> WsShifts:
    """Shifts of every element of a Hamiltonian file, matched by their labels, not their order.

    Parameters
    ----------
    path
        A `_wsvec.dat`, plain or gzipped: a comment line, then one record for each R, m, n.
    hamiltonian
        The file it belongs to. An R that is listed twice there gets the same shifts twice.
    mp_grid
        Where given, every shift must be a vector of this supercell.

    Returns
    -------
    WsShifts

    Raises
    ------
    InputError
        Cut short, not integers, wrong counts, labels that the Hamiltonian does not have, records
        given twice or missing, shifts of another mesh. Records of an R that the Hamiltonian has
        lost, while it lists -R, are passed over: the audit counts such R.
    """
    file = str(path)
    check_lattice_vectors(hamiltonian.r_cells, hamiltonian.file)
    found = _Found(file, hamiltonian, mp_grid)
    with open_bytes(path) as stream:
        if not stream.readline(1 << 16).endswith(b"\n"):
            raise InputError(
                file, line=1, found="no end of line", expected="a comment line", todo=AGAIN
            )
        lines = integer_lines(stream, file, line_no=1, expected=_INTEGERS, todo=AGAIN)
        for records in ws_records(lines, file):
            found.add(records)
    return found.complete()


class _Found:
    """The records read so far, and what they must still make up."""

    def __init__(
        self, file: str, hamiltonian: HamiltonianFile, mp_grid: tuple[int, int, int] | None
    ) -> None:
        self._file = file
        self._hamiltonian = hamiltonian
        self._mesh = None if mp_grid is None else np.asarray(mp_grid, dtype=np.int64)
        n_elements = len(hamiltonian.r_cells) * hamiltonian.n_wann**2
        self._record_of = np.full(n_elements, -1, dtype=np.int64)
        self._counts: list[IntArray] = []
        self._shifts: list[NDArray[np.int32]] = []
        self._n_records = 0
        self._last_line = 1

    def add(self, records: WsRecords) -> None:
        """Check labels and shifts of whole records and keep them."""
        records = self._without_lost_blocks(records)
        if not len(records.labels):
            return
        element = self._elements(records)
        self._check_new(records, element)
        self._check_shifts(records)
        self._record_of[element] = self._n_records + np.arange(len(element))
        self._n_records += len(element)
        self._counts.append(records.counts)
        self._shifts.append(records.shifts.astype(np.int32))
        self._last_line = int(records.line_no[-1] + 1 + records.counts[-1])

    def complete(self) -> WsShifts:
        """All shifts in the order of the Hamiltonian."""
        r_cells, n_wann = self._hamiltonian.r_cells, self._hamiltonian.n_wann
        # An R listed twice in the Hamiltonian shares the records of its first listing.
        first = first_rows_of(r_cells, r_cells)
        record = self._record_of.reshape(len(r_cells), -1)[first].reshape(-1)
        missing = record < 0
        if missing.any():
            self._refuse_missing(int(np.argmax(missing)), int(missing.sum()))
        counts = np.concatenate(self._counts)
        shifts = np.concatenate(self._shifts)
        if not np.array_equal(record, np.arange(len(counts))):
            starts = np.cumsum(counts) - counts
            counts, starts = counts[record], starts[record]
            within = np.arange(counts.sum()) - np.repeat(np.cumsum(counts) - counts, counts)
            shifts = shifts[np.repeat(starts, counts) + within]
        return WsShifts(
            r_cells, counts.reshape(len(r_cells), n_wann, n_wann), shifts.astype(np.int64)
        )

    def _without_lost_blocks(self, records: WsRecords) -> WsRecords:
        r_cells, r = self._hamiltonian.r_cells, records.labels[:, :3]
        too_large = _too_large(r)
        self._refuse_where(too_large, records, "a lattice vector of the Hamiltonian")
        lost = (first_rows_of(r_cells, r) < 0) & (first_rows_of(r_cells, -r) >= 0)
        if not lost.any():
            return records
        kept = ~lost
        return WsRecords(
            records.labels[kept],
            records.counts[kept],
            records.shifts[np.repeat(kept, records.counts)],
            records.line_no[kept],
        )

    def _elements(self, records: WsRecords) -> IntArray:
        """Index of each record's element in C order of (R, m, n)."""
        n_wann = self._hamiltonian.n_wann
        r, m, n = records.labels[:, :3], records.labels[:, 3], records.labels[:, 4]
        outside = (m < 1) | (m > n_wann) | (n < 1) | (n > n_wann)
        self._refuse_where(outside, records, f"m and n from 1 to {n_wann}")
        row = first_rows_of(self._hamiltonian.r_cells, r)
        self._refuse_where(row < 0, records, f"an R that {self._hamiltonian.file} lists")
        return (row * n_wann + m - 1) * n_wann + n - 1

    def _check_new(self, records: WsRecords, element: IntArray) -> None:
        again = self._record_of[element] >= 0
        first = np.unique(element, return_index=True)[1]
        if len(first) < len(element):
            repeated = np.ones(len(element), dtype=bool)
            repeated[first] = False
            again |= repeated
        self._refuse_where(again, records, "each R, m, n once")

    def _check_shifts(self, records: WsRecords) -> None:
        of_record = np.repeat(np.arange(len(records.counts)), records.counts)
        self._refuse_shift(_too_large(records.shifts), of_record, records, "a smaller shift")
        if self._mesh is not None:
            off = (records.shifts % self._mesh != 0).any(axis=1)
            mesh = " x ".join(str(n) for n in self._mesh)
            self._refuse_shift(off, of_record, records, f"a vector of the {mesh} supercell")
        keys = vector_keys(records.shifts)
        order = np.lexsort((keys, of_record))
        same = (np.diff(keys[order]) == 0) & (np.diff(of_record[order]) == 0)
        repeated = np.zeros(len(keys), dtype=bool)
        repeated[order[1:][same]] = True
        self._refuse_shift(repeated, of_record, records, "shifts that differ")

    def _refuse_where(self, wrong: BoolArray, records: WsRecords, expected: str) -> None:
        if wrong.any():
            at = int(np.argmax(wrong))
            label = " ".join(str(value) for value in records.labels[at])
            raise InputError(
                self._file,
                line=int(records.line_no[at]),
                found=f"R1 R2 R3 m n = {label}",
                expected=expected,
                todo=AGAIN,
            )

    def _refuse_shift(
        self, wrong: BoolArray, of_record: IntArray, records: WsRecords, expected: str
    ) -> None:
        if wrong.any():
            at = int(np.argmax(wrong))
            record = int(of_record[at])
            row = at - int(np.searchsorted(of_record, record))
            raise InputError(
                self._file,
                line=int(records.line_no[record]) + 2 + row,
                found=f"the shift {' '.join(str(value) for value in records.shifts[at])}",
                expected=expected,
                todo=AGAIN,
            )

    def _refuse_missing(self, element: int, n_missing: int) -> NoReturn:
        n_wann = self._hamiltonian.n_wann
        rest, n = divmod(element, n_wann)
        r, m = divmod(rest, n_wann)
        label = " ".join(str(value) for value in self._hamiltonian.r_cells[r])
        others = f" and {n_missing - 1} others" if n_missing > 1 else ""
        raise InputError(
            self._file,
            line=self._last_line,
            found=f"the end but no record R1 R2 R3 m n = {label} {m + 1} {n + 1}{others}",
            expected=f"one for each element of {self._hamiltonian.file}",
            todo=AGAIN,
        )


def _too_large(vectors: IntArray) -> BoolArray:
    return np.asarray((np.abs(vectors) >= LARGEST_COMPONENT).any(axis=1))
