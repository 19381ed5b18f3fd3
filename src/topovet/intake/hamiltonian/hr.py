"""Reading `_hr.dat`: H_mn(R) as Wannier90 and others write it.

First a line of text, num_wann, nrpts and nrpts degeneracies; then one line `R1 R2 R3 m n Re Im`
for each element, m fastest, then n, then R. Files in fixed columns take the fast path
(`hr_fixed.py`); what it cannot take goes on in the tolerant one (`hr_tolerant.py`), from the lines
where the fast path stopped.
"""

from __future__ import annotations

from pathlib import Path
from typing import BinaryIO

import numpy as np

from topovet.arrays import ComplexArray, IntArray, frozen
from topovet.intake.hamiltonian.fixed_columns import infer_layout
from topovet.intake.hamiltonian.hamiltonian_head import (
    allocate_hamiltonian,
    check_nothing_follows,
    read_counts,
    read_header,
)
from topovet.intake.hamiltonian.hr_fixed import BlockFiller
from topovet.intake.hamiltonian.hr_tolerant import HR_COLUMNS, WANNIER90_STOPS, fill_tolerant
from topovet.intake.hamiltonian.line_words import LineParser
from topovet.intake.opening import LineReader, open_bytes
from topovet.intake.records import HamiltonianFile

_SHORTEST_LINE = len("0 0 0 1 1 0 0\n")


def read_hr(path: str | Path, *, fast: bool = True) -> HamiltonianFile:
    """Read a plain or gzipped `_hr.dat`.

    Memory: the result (16 bytes per element) and a buffer of a few MB, however large the file.
    Each number is bit for bit what `float(text)` gives.

    Parameters
    ----------
    path
        The file.
    fast
        False reads everything line by line; the answer is the same.

    Returns
    -------
    HamiltonianFile
        h_r is C-contiguous, (n_r, m, n); repeated R blocks are kept as they stand.

    Raises
    ------
    InputError
        The file cannot be read, is no such file, or is damaged: cut short, numbers that are not
        finite or overflowed their columns, counts that do not fit, pairs (m, n) that are missing,
        repeated or out of range, something after the end, or a line unlike all others.
    """
    with open_bytes(path) as stream:
        reader = LineReader(stream, path)
        header = read_header(reader)
        counts = read_counts(reader, _SHORTEST_LINE)
        h_r = allocate_hamiltonian(reader, counts.n_r, counts.n_wann)
        r_cells = np.zeros((counts.n_r, 3), dtype=np.int64)
        decimals, name = _fill(stream, reader, r_cells, h_r, fast)
    return HamiltonianFile(
        file=str(path),
        header=header,
        degeneracies=frozen(counts.degeneracies),
        r_cells=frozen(r_cells),
        h_r=frozen(h_r),
        decimals=decimals,
        reader=name,
    )


def _fill(
    stream: BinaryIO, reader: LineReader, r_cells: IntArray, h_r: ComplexArray, fast: bool
) -> tuple[int | None, str]:
    """Fill r_cells and h_r in place; the decimals and the name of the reader that did it."""
    usual_stops = _usual_stops(reader.glimpse())
    parser = LineParser(reader.file, HR_COLUMNS, 5, usual_stops=usual_stops)
    first_no = reader.line_no + 1
    first = reader.next_raw() or b""
    layout = infer_layout(first, 5, 2, usual_stops=usual_stops) if fast else None
    n_done, pending = 0, first
    if layout is not None:
        filler = BlockFiller(layout, r_cells, h_r)
        whole = filler.fill(stream, first)
        n_done, pending = filler.n_done, filler.rest
        if whole:
            reader = LineReader(stream, reader.file, line_no=first_no + n_done - 1)
            check_nothing_follows(reader, h_r.size)
            return layout.fixed_decimals, "fixed-columns"
        if n_done:
            parser.credit(first.rstrip(b"\r\n"), first_no, n_done, filler.round_ends)
    reader = LineReader(stream, reader.file, line_no=first_no + n_done - 1, pending=pending)
    fill_tolerant(reader, parser, r_cells, h_r, n_done)
    check_nothing_follows(reader, h_r.size)
    return parser.tally.fixed_decimals(), "tolerant"


def _usual_stops(lines: list[bytes]) -> tuple[int, ...]:
    """Ends of the columns by the first line whose words do not touch, else Wannier90's."""
    for line in lines:
        layout = infer_layout(line + b"\n", 5, 2)
        if layout is not None:
            return layout.stops
    return WANNIER90_STOPS
