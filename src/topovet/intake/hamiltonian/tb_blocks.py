"""The blocks of a `_tb.dat`: a line with R, then n_wann**2 lines of m, n and numbers.

Blocks in fixed columns are converted many lines at once; from the first line that does not fit
on, everything is read word by word.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import BinaryIO

import numpy as np

from topovet.arrays import FloatArray
from topovet.intake.hamiltonian.digit_words import NotInColumnsError
from topovet.intake.hamiltonian.element_lines import (
    ElementCount,
    next_words,
    pair_index,
    pairs_seen,
)
from topovet.intake.hamiltonian.fixed_columns import FixedLines, infer_layout, read_numbers
from topovet.intake.hamiltonian.line_words import LineParser
from topovet.intake.hamiltonian.pair_columns import PairColumns
from topovet.intake.opening import LineReader


@dataclass(slots=True)
class Cursor:
    """Where the next line comes from.

    Attributes
    ----------
    stream
        The file.
    reader
        Its lines, and any bytes of it taken but not used.
    fast
        Whether all lines so far were in fixed columns.
    """

    stream: BinaryIO
    reader: LineReader
    fast: bool


class BlockSection:
    """One section of the file, the Hamiltonian or the positions.

    Iterating reads it: for each block R and the numbers, (n_numbers, m, n), in an array that is
    used again for the next block.

    Attributes
    ----------
    r_line_no
        Line of the R read last.
    fixed_decimals
        At the end: decimals of all numbers; None with exponents or varying decimals.
    """

    def __init__(self, cursor: Cursor, count: ElementCount, columns: tuple[str, ...]) -> None:
        """Prepare to read lines of m, n and numbers, called `columns` in messages."""
        self.r_line_no = 0
        self.fixed_decimals: int | None = None
        self._cursor = cursor
        self._count = count
        self._parser = LineParser(cursor.reader.file, columns, 2)
        self._n_numbers = len(columns) - 2
        self._parts = np.empty((self._n_numbers, count.n_wann, count.n_wann))
        self._first_line, self._first_no = b"", 0
        self._round_ends = [False] * self._n_numbers
        self._lines: FixedLines | None = None
        self._pairs: PairColumns | None = None

    def __iter__(self) -> Iterator[tuple[list[int], FloatArray]]:
        """Read the blocks.

        Raises
        ------
        InputError
            The section is damaged; lines unlike all others are refused after the last block.
        """
        parser = LineParser(self._cursor.reader.file, ("R1", "R2", "R3"), 3)
        for _ in range(self._count.n_r):
            words = next_words(self._cursor.reader, parser, self._count)
            self.r_line_no = self._cursor.reader.line_no
            if not (self._cursor.fast and self._read_block_fast()):
                self._read_block_by_words()
            yield [int(word) for word in words], self._parts
        if self._cursor.fast and self._lines is not None:
            self.fixed_decimals = self._lines.layout.fixed_decimals
            return
        self._parser.settle()
        self._parser.tally.check()
        self.fixed_decimals = self._parser.tally.fixed_decimals()

    def _read_block_fast(self) -> bool:
        """Read one block in fixed columns; False if it, or the rest of it, must be read by words.

        That also ends the fast way for all that follows.
        """
        first = b"" if self._lines is not None else self._begin()
        lines, pairs, count = self._lines, self._pairs, self._count
        if lines is None or pairs is None:
            return self._hand_over(first)
        at = 0
        try:
            while at < count.per_block:
                n_lines = pairs.step_lines(at, 1)
                final = count.n_done + n_lines == count.n_all
                if not lines.fill(self._cursor.stream, n_lines, first=first, final=final):
                    break
                first = b""
                self._store(lines, pairs, at)
                at += n_lines
                count.n_done += n_lines
                self._cursor.reader.line_no += n_lines
            else:
                return True
        except NotInColumnsError:
            pass
        return self._hand_over(lines.content())

    def _begin(self) -> bytes:
        """Take the layout, if there is one, from the first line, and return that line."""
        reader = self._cursor.reader
        first = reader.next_raw() or b""
        self._first_line, self._first_no = first.rstrip(b"\r\n"), reader.line_no
        reader.line_no -= bool(first)  # It is counted when it is used.
        layout = infer_layout(first, 2, self._n_numbers)
        if layout is not None:
            self._pairs = PairColumns(layout, self._count.n_wann)
            self._lines = FixedLines(layout, self._pairs.step_lines(0, 1))
        return first

    def _hand_over(self, rest: bytes) -> bool:
        """Go on word by word, with the bytes taken but not used. Returns False."""
        cursor = self._cursor
        cursor.fast = False
        cursor.reader = LineReader(
            cursor.stream, cursor.reader.file, line_no=cursor.reader.line_no, pending=rest
        )
        if self._count.n_done:
            self._parser.credit(
                self._first_line, self._first_no, self._count.n_done, self._round_ends
            )
        return False

    def _store(self, lines: FixedLines, pairs: PairColumns, at: int) -> None:
        """Check and convert the lines in the buffer, which start after `at` of the block's."""
        lines.check_tail()
        pairs.check(lines, at)
        n_wann = self._count.n_wann
        columns = slice(at // n_wann, (at + lines.n_lines) // n_wann)
        for part, number in zip(self._parts, lines.layout.numbers, strict=True):
            part[:, columns] = read_numbers(lines, number).reshape(-1, n_wann).T
        lines.note_round_ends(self._round_ends)

    def _read_block_by_words(self) -> None:
        """Read the rest of the block that count.n_done is in."""
        reader, parser, count = self._cursor.reader, self._parser, self._count
        flat = self._parts.reshape(self._n_numbers, -1)
        seen = pairs_seen(count)
        for _ in range(count.per_block - count.n_done % count.per_block):
            words = next_words(reader, parser, count)
            place = pair_index(words, reader, seen, count.n_wann, "this R")
            flat[:, place] = [parser.to_float(word, reader.line_no) for word in words[2:]]
            count.n_done += 1
