"""Reading Wannier90's `_tb.dat`: cell, H_mn(R) and positions <m 0|r|n R>.

A line of text, three lattice vectors in angstrom, num_wann, nrpts, the degeneracies; then for each
R a blank line, a line with R and a line `m n Re Im` for each element; then the same once more with
the three complex components of the position. Of the positions only the centres are kept, but all
are read and checked.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np

from topovet.arrays import FloatArray, frozen
from topovet.errors import InputError
from topovet.intake.hamiltonian.element_lines import ElementCount
from topovet.intake.hamiltonian.hamiltonian_head import (
    allocate_hamiltonian,
    check_nothing_follows,
    read_counts,
    read_header,
)
from topovet.intake.hamiltonian.line_words import LineParser
from topovet.intake.hamiltonian.tb_blocks import BlockSection, Cursor
from topovet.intake.opening import LineReader, open_bytes
from topovet.intake.records import HamiltonianFile

_H_COLUMNS = ("m", "n", "Re", "Im")
_R_COLUMNS = ("m", "n", "Re x", "Im x", "Re y", "Im y", "Re z", "Im z")
_SHORTEST_LINES = len("1 1 0 0\n") + len("1 1 0 0 0 0 0 0\n")
_SMALLEST_CELL_ANG3 = 1e-3


def read_tb(path: str | Path, *, fast: bool = True) -> HamiltonianFile:
    """Read a plain or gzipped `_tb.dat`.

    Memory: the result and the text and numbers of one R block. Each number is bit for bit what
    `float(text)` gives.

    Parameters
    ----------
    path
        The file.
    fast
        False reads everything line by line; the answer is the same.

    Returns
    -------
    HamiltonianFile
        With cell, and with centres_cart where R = (0, 0, 0) is listed. Beware: Wannier90 follows
        guiding centres for `_centres.xyz`, but not for this file, so that some of these centres
        may be on another branch of the logarithm, off by more than a lattice vector.

    Raises
    ------
    InputError
        The file cannot be read, is no such file, or is damaged; see `read_hr`.
    """
    with open_bytes(path) as stream:
        reader = LineReader(stream, path)
        header = read_header(reader)
        cell = _read_cell(reader)
        counts = read_counts(reader, _SHORTEST_LINES)
        h_r = allocate_hamiltonian(reader, counts.n_r, counts.n_wann)
        r_cells = np.zeros((counts.n_r, 3), dtype=np.int64)
        cursor = Cursor(stream, reader, fast)
        section = BlockSection(cursor, ElementCount(counts.n_r, counts.n_wann), _H_COLUMNS)
        for i, (r_cell, parts) in enumerate(section):
            r_cells[i] = r_cell
            h_r[i].real, h_r[i].imag = parts
        centres = _read_centres(cursor, r_cells.tolist(), counts.n_wann)
        check_nothing_follows(cursor.reader, 2 * h_r.size)
    return HamiltonianFile(
        file=str(path),
        header=header,
        degeneracies=frozen(counts.degeneracies),
        r_cells=frozen(r_cells),
        h_r=frozen(h_r),
        decimals=section.fixed_decimals,
        reader="fixed-columns" if cursor.fast else "tolerant",
        cell=frozen(cell),
        centres_cart=None if centres is None else frozen(centres),
    )


def _read_cell(reader: LineReader) -> FloatArray:
    """Three lattice vectors, rows, in angstrom."""
    parser = LineParser(reader.file, ("x", "y", "z"), 0)
    rows = []
    for _ in range(3):
        line = reader.next_line() or b""
        words = parser.words(line, reader.line_no)
        rows.append([parser.to_float(word, reader.line_no) for word in words])
    cell = np.array(rows)
    if abs(np.linalg.det(cell)) < _SMALLEST_CELL_ANG3:
        raise InputError(
            reader.file,
            line=reader.line_no,
            found="lattice vectors that span no volume",
            expected="three independent vectors in angstrom",
            todo="check that this is the right file and that its top is undamaged",
        )
    return cell


def _read_centres(cursor: Cursor, r_cells: list[list[int]], n_wann: int) -> FloatArray | None:
    """Read the positions; (n_wann, 3) centres from R = 0, None where it is not listed."""
    count = ElementCount(len(r_cells), n_wann, kind="position matrix elements")
    centres = None
    section = BlockSection(cursor, count, _R_COLUMNS)
    for i, (r_cell, parts) in enumerate(section):
        if r_cell != r_cells[i]:
            raise InputError(
                cursor.reader.file,
                line=section.r_line_no,
                found=f"positions for R = {tuple(r_cell)}",
                expected=f"R = {tuple(r_cells[i])}, in the order of the Hamiltonian's blocks",
                todo="write the file again",
            )
        if centres is None and not any(r_cell):
            centres = np.diagonal(parts[::2], axis1=1, axis2=2).T.copy()
    return centres
