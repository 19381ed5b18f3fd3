"""The columns m and n of matrix elements in Wannier90's order, checked as text."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from topovet.intake.hamiltonian.digit_words import NotInColumnsError, WordArray
from topovet.intake.hamiltonian.fixed_columns import FixedLines, LineLayout

LINES_PER_STEP = 32_000


class PairColumns:
    """What m and n must read in the lines of a block: m runs first, from 1 to n_wann."""

    def __init__(self, layout: LineLayout, n_wann: int) -> None:
        """Take the last two integer columns of the layout as m and n."""
        starts = (0, 0, *layout.integer_stops)
        self._start, self._m_stop, self._n_stop = starts[-3], starts[-2], starts[-1]
        self._n_wann = n_wann
        self._columns = range(0)
        self._expected: list[WordArray] = []

    def step_lines(self, at: int, n_blocks: int) -> int:
        """How many lines to take next: whole blocks, or whole columns n of a large block.

        Parameters
        ----------
        at
            Lines of the current block already taken.
        n_blocks
            Blocks still to come, the current one included.
        """
        per_block = self._n_wann**2
        if per_block <= LINES_PER_STEP:
            return min(LINES_PER_STEP // per_block, n_blocks) * per_block
        n_columns = max(1, LINES_PER_STEP // self._n_wann)
        return min(n_columns * self._n_wann, per_block - at)

    def check(self, lines: FixedLines, at: int) -> None:
        """Check whole blocks, or the part of one that starts after `at` of its lines.

        Raises
        ------
        NotInColumnsError
            Any line that does not hold the pair due there.
        """
        n_columns = min(lines.n_lines // self._n_wann, self._n_wann)
        columns = range(at // self._n_wann + 1, at // self._n_wann + 1 + n_columns)
        if columns != self._columns:
            self._columns, self._expected = columns, self._texts(columns)
        found = lines.span_words(self._start, self._n_stop)
        for words, expected in zip(found, self._expected, strict=True):
            if not (words.reshape(-1, len(expected)) == expected).all():
                raise NotInColumnsError

    def _texts(self, columns: range) -> list[WordArray]:
        """The text of (m, n) for all m and these n, as the words it is compared with."""
        m_stop, n_stop = self._m_stop - self._start, self._n_stop - self._start
        m_text = _right_aligned(range(1, self._n_wann + 1), m_stop)
        n_text = _right_aligned(columns, n_stop - m_stop)
        layout = LineLayout(n_stop, b"", (m_stop, n_stop), ())
        table = FixedLines(layout, len(m_text) * len(n_text))
        table.set_columns([np.tile(m_text, len(n_text)), np.repeat(n_text, len(m_text))])
        return table.span_words(0, n_stop)


def _right_aligned(numbers: range, width: int) -> NDArray[np.bytes_]:
    """The numbers as text of one width."""
    text = np.array([b"%*d" % (width, number) for number in numbers], dtype=bytes)
    if text.itemsize != width:
        raise NotInColumnsError
    return text
