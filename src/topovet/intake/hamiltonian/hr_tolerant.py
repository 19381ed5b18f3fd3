"""The thorough reader of `_hr.dat`: line by line, any layout, and the damage named.

Blank lines may stand anywhere and the pairs (m, n) may come in any order, but all elements of one
R must stand together, each exactly once.
"""

from __future__ import annotations

from topovet.arrays import ComplexArray, IntArray
from topovet.errors import InputError
from topovet.intake.hamiltonian.element_lines import (
    ElementCount,
    next_words,
    pair_index,
    pairs_seen,
)
from topovet.intake.hamiltonian.line_words import LineParser
from topovet.intake.opening import LineReader

HR_COLUMNS = ("R1", "R2", "R3", "m", "n", "Re", "Im")
WANNIER90_STOPS = (5, 10, 15, 20, 25, 37, 49)
"""Ends of the columns of Wannier90's format 5I5,2F12.6."""


def fill_tolerant(
    reader: LineReader,
    parser: LineParser,
    r_cells: IntArray,
    h_r: ComplexArray,
    n_done: int = 0,
) -> None:
    """Fill H(R) from element n_done (in Wannier90's order) on.

    Raises
    ------
    InputError
        The file is damaged; see the functions of this module and `LineTally.check`.
    """
    n_r, n_wann = h_r.shape[:2]
    count = ElementCount(n_r, n_wann, n_done)
    while count.n_done < count.n_all:
        _fill_block(reader, parser, r_cells, h_r, count)
    parser.settle()
    parser.tally.check()


def _fill_block(
    reader: LineReader,
    parser: LineParser,
    r_cells: IntArray,
    h_r: ComplexArray,
    count: ElementCount,
) -> None:
    """Read the rest of the block that count.n_done is in."""
    block, at = divmod(count.n_done, count.per_block)
    seen = pairs_seen(count)
    r_words = [b"%d" % r for r in r_cells[block].tolist()] if at else []
    label = f"R = {_listed(r_words)}"
    elements = h_r[block].reshape(-1)
    while at < count.per_block:
        words = next_words(reader, parser, count)
        if words[:3] != r_words:
            if at and list(map(int, words[:3])) != r_cells[block].tolist():
                raise _r_changed(reader, words[:3], r_cells[block], at, count)
            r_words = words[:3]
            r_cells[block] = list(map(int, r_words))
            label = f"R = {_listed(r_words)}"
        place = pair_index(words[3:], reader, seen, count.n_wann, label)
        elements[place] = complex(
            parser.to_float(words[5], reader.line_no), parser.to_float(words[6], reader.line_no)
        )
        at += 1
        count.n_done += 1


def _r_changed(
    reader: LineReader, words: list[bytes], r_cell: IntArray, at: int, count: ElementCount
) -> InputError:
    usual = _listed([b"%d" % r for r in r_cell.tolist()])
    return InputError(
        reader.file,
        line=reader.line_no,
        found=f"R = {_listed(words)} after {at} of the {count.per_block} elements of R = {usual}",
        expected=f"all pairs (m, n) of {usual} together",
        todo="restore the missing or damaged line, or check num_wann at the top of the file",
    )


def _listed(words: list[bytes]) -> str:
    return "(" + ", ".join(word.decode() for word in words) + ")"
