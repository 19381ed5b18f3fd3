"""Matrix elements line by line: how many are there, whole lines only, each pair (m, n) once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.errors import InputError, quoted
from topovet.intake.hamiltonian.line_words import MEND, LineParser
from topovet.intake.opening import LineReader

COPY_AGAIN = "copy the file again, or check num_wann and nrpts at its top"


@dataclass(slots=True)
class ElementCount:
    """How far a reader has come in the matrix elements of a file."""

    n_r: int
    n_wann: int
    n_done: int = 0
    kind: str = "matrix elements"

    @property
    def per_block(self) -> int:
        return self.n_wann**2

    @property
    def n_all(self) -> int:
        return self.n_r * self.per_block

    def cut_short(self, reader: LineReader, last_line: bytes | None = None) -> InputError:
        """The error for a file that ends too early, perhaps in the middle of its last line."""
        end = "the end of the file" if last_line is None else f"the cut line {quoted(last_line)}"
        return InputError(
            reader.file,
            line=reader.line_no,
            found=f"{end} after {self.n_done} of {self.n_all} {self.kind}",
            expected=f"{self.n_r} R vectors of {self.n_wann} x {self.n_wann} elements",
            todo=COPY_AGAIN,
        )


def next_words(reader: LineReader, parser: LineParser, count: ElementCount) -> list[bytes]:
    """The words of the next line that is not blank.

    Raises
    ------
    InputError
        The file ends here, or ends in this line without showing that the line is whole; or the
        line is not what `LineParser.words` wants.
    """
    line = b""
    while not line.strip():
        following = reader.next_line()
        if following is None:
            raise count.cut_short(reader)
        line = following
    if reader.ended:
        return parser.words(line, reader.line_no)
    if count.n_done + 1 < count.n_all:
        raise count.cut_short(reader, line)
    try:
        words = parser.words(line, reader.line_no)
    except InputError:
        raise count.cut_short(reader, line) from None
    parser.settle()
    if not parser.tally.vouches_for_last_line():
        raise InputError(
            reader.file,
            line=reader.line_no,
            found=f"the last line {quoted(line)} without a line end, perhaps cut",
            expected="a line end",
            todo="copy the file again, or end that line if it is whole",
        )
    return words


def pair_index(
    words: list[bytes], reader: LineReader, seen: bytearray, n_wann: int, block: str
) -> int:
    """Place of (m, n) in C order of a block, which is marked as seen.

    Raises
    ------
    InputError
        m or n outside 1..n_wann, or a pair that the block has had before.
    """
    m, n = int(words[0]), int(words[1])
    if not (0 < m <= n_wann and 0 < n <= n_wann):
        raise InputError(
            reader.file,
            line=reader.line_no,
            found=f"(m, n) = ({m}, {n})",
            expected=f"numbers from 1 to {n_wann}",
            todo="check num_wann at the top of the file, and this line for damage",
        )
    place = (m - 1) * n_wann + n - 1
    if seen[place]:
        raise InputError(
            reader.file,
            line=reader.line_no,
            found=f"(m, n) = ({m}, {n}) once more for {block}",
            expected="each pair once",
            todo=MEND,
        )
    seen[place] = 1
    return place


def pairs_seen(count: ElementCount) -> bytearray:
    """Which pairs of the current block are done, if all came in Wannier90's order; C order."""
    at = count.n_done % count.per_block
    if not at:
        return bytearray(count.per_block)
    done = np.zeros((count.n_wann, count.n_wann), dtype=np.uint8)
    done[:, : at // count.n_wann] = 1
    return bytearray(done.tobytes())
