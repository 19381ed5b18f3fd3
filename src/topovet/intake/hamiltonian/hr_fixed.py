"""The fast reader of `_hr.dat`: lines of one fixed layout, about 32,000 at a time.

Each step takes whole R blocks, or whole columns n of one large block. The text of (m, n) must be
that of Wannier90's order, m fastest, and the text of R that of the block's first line; both are
compared word by word. At the first byte that does not fit the reader stops and hands the lines
of that step back.
"""

from __future__ import annotations

from typing import BinaryIO

import numpy as np

from topovet.arrays import ComplexArray, IntArray
from topovet.intake.hamiltonian.digit_words import NotInColumnsError, WordArray
from topovet.intake.hamiltonian.fixed_columns import (
    FixedLines,
    LineLayout,
    read_integers,
    read_numbers,
)
from topovet.intake.hamiltonian.pair_columns import PairColumns


class BlockFiller:
    """Fills H(R) from the lines of fixed columns.

    Attributes
    ----------
    n_done
        Matrix elements stored so far, in file order.
    round_ends
        For each number of a line, whether its last decimal was 0 in some line.
    rest
        After a False from `fill`: the bytes taken from the stream but not stored.
    """

    def __init__(self, layout: LineLayout, r_cells: IntArray, h_r: ComplexArray) -> None:
        """Prepare to fill r_cells (n_r, 3) and h_r (n_r, n_wann, n_wann) in place."""
        self.n_done = 0
        self.rest = b""
        self.round_ends = [False, False]
        self._r_cells, self._h_r = r_cells, h_r
        self._n_r, self._n_wann = h_r.shape[0], h_r.shape[1]
        self._pairs = PairColumns(layout, self._n_wann)
        self._lines = FixedLines(layout, self._pairs.step_lines(0, self._n_r))
        self._first_r_words: list[WordArray] = []

    def fill(self, stream: BinaryIO, first: bytes) -> bool:
        """Read all elements, `first` before the stream; False where something does not fit."""
        self.rest = first
        try:
            while self.n_done < self._h_r.size:
                block, at = divmod(self.n_done, self._n_wann**2)
                n_lines = self._pairs.step_lines(at, self._n_r - block)
                final = self.n_done + n_lines == self._h_r.size
                if not self._lines.fill(stream, n_lines, first=self.rest, final=final):
                    break
                self.rest = b""
                self._store(block, at)
                self.n_done += n_lines
            else:
                return True
        except NotInColumnsError:
            pass
        self.rest = self._lines.content()
        return False

    def _store(self, block: int, at: int) -> None:
        """Check and convert the lines in the buffer."""
        lines = self._lines
        n_blocks = max(1, lines.n_lines // self._n_wann**2)
        lines.check_tail()
        self._pairs.check(lines, at)
        self._check_r(n_blocks, block, at)
        elements = np.empty(lines.n_lines, dtype=np.complex128)
        elements.real = read_numbers(lines, lines.layout.numbers[0])
        elements.imag = read_numbers(lines, lines.layout.numbers[1])
        lines.note_round_ends(self.round_ends)
        # The file runs over n, then m: [r, n, m] is turned into [r, m, n].
        by_column = elements.reshape(n_blocks, -1, self._n_wann)
        columns = slice(at // self._n_wann, at // self._n_wann + by_column.shape[1])
        self._h_r[block : block + n_blocks, :, columns] = by_column.transpose(0, 2, 1)

    def _check_r(self, n_blocks: int, block: int, at: int) -> None:
        """All lines of a block carry the R of its first line, which is stored."""
        stops = (0, *self._lines.layout.integer_stops[:3])
        found = [words.reshape(n_blocks, -1) for words in self._lines.span_words(0, stops[-1])]
        if at == 0:
            self._first_r_words = [words[:, :1].copy() for words in found]
            rows = slice(None, None, found[0].shape[1])
            for axis in range(3):
                self._r_cells[block : block + n_blocks, axis] = read_integers(
                    self._lines, stops[axis], stops[axis + 1], rows
                )
        for words, expected in zip(found, self._first_r_words, strict=True):
            if not (words == expected).all():
                raise NotInColumnsError
