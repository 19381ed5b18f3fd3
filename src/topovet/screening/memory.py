"""What vetting a case takes in memory, estimated from the first lines of its Hamiltonian file."""

from __future__ import annotations

from pathlib import Path

from topovet.errors import InputError
from topovet.intake.discovery import find_case
from topovet.intake.opening import LineReader, open_bytes

AT_REST = 240 << 20
"""A process with all libraries loaded and the report of a small case drawn (measured: 160 to
215 MB)."""

COPIES = 12
"""Copies of H(R), 16 bytes an element, that are alive at once at the worst moment (measured: 8 with
60 functions and 729 R vectors; Wigner-Seitz shifts can make two R vectors out of one)."""

_LONGEST_LINE = 4096
_MOST_DIGITS = 9
_LINES_BEFORE_COUNTS = {"hr": 1, "tb": 4}
"""A header; in `_tb.dat` the three lattice vectors too."""


def estimate(case: str | Path) -> tuple[int, int]:
    """Size of the Hamiltonian file of a case, and the memory that vetting it takes, in bytes.

    (0, `AT_REST`) for a case whose files do not say: it will fail before it takes more.
    """
    try:
        files = find_case(case)
        kind, path = ("hr", files.hr) if files.hr is not None else ("tb", files.tb)
        assert path is not None
        n_wann, n_r = _counts(path, _LINES_BEFORE_COUNTS[kind])
        size = Path(path).stat().st_size
    except (InputError, OSError, ValueError):
        return 0, AT_REST
    # a file cannot hold more elements than it has room for, whatever its head promises
    elements = min(n_r * n_wann**2, size * _MOST_ELEMENTS_PER_BYTE)
    return size, AT_REST + COPIES * 16 * elements


_MOST_ELEMENTS_PER_BYTE = 2
"""A line of 20 bytes at the least, which gzip makes smaller by a factor of 40 at the most in
files that are no trick."""


def _counts(path: str, skipped: int) -> tuple[int, int]:
    """num_wann and nrpts; raises InputError or ValueError where they are not there."""
    with open_bytes(path) as stream:
        reader = LineReader(stream, path, max_line=_LONGEST_LINE)
        for _ in range(skipped):
            reader.next_line()
        return _count(reader), _count(reader)


def _count(reader: LineReader) -> int:
    words = (reader.next_line() or b"").split()
    if not words or not words[0].isdigit() or len(words[0]) > _MOST_DIGITS or int(words[0]) < 1:
        raise ValueError("no count")
    return int(words[0])
