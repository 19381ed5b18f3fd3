"""What `_hr.dat` and `_tb.dat` have in common: counts, degeneracies, what may follow the end."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, IntArray
from topovet.errors import InputError, quoted
from topovet.intake.hamiltonian.element_lines import COPY_AGAIN
from topovet.intake.opening import LineReader, largest_content

_MAX_DIGITS = 9
_LONGEST_HEADER = 200
_CHECK_KIND = "check that this is the right file and that its top is undamaged"


@dataclass(frozen=True, slots=True, eq=False)
class HamiltonianCounts:
    """The numbers at the top of the file.

    Attributes
    ----------
    n_wann, n_r
        Wannier functions; R vectors.
    degeneracies
        (n_r,) Wigner-Seitz degeneracy of each R.
    """

    n_wann: int
    n_r: int
    degeneracies: IntArray


def read_header(reader: LineReader) -> str:
    """The first line, stripped and shortened; what cannot be printed becomes U+FFFD."""
    text = (reader.next_line() or b"").decode("utf-8", errors="replace").strip()
    return "".join(c if c.isprintable() else "\ufffd" for c in text[:_LONGEST_HEADER])


def read_counts(reader: LineReader, line_bytes: int) -> HamiltonianCounts:
    """Read num_wann, nrpts and the degeneracies.

    Parameters
    ----------
    line_bytes
        Fewest bytes that a matrix element can take in such a file.

    Raises
    ------
    InputError
        Counts that are no positive integers, or promise more matrix elements than the file has
        room for; too many or too few degeneracies, or one that is no positive integer.
    """
    n_wann = _read_count(reader, "num_wann, the number of Wannier functions")
    n_r = _read_count(reader, "nrpts, the number of R vectors")
    promised = n_r * n_wann**2 * line_bytes - 1
    degeneracies = _read_degeneracies(reader, n_r)
    if promised > largest_content(reader.file):
        # No memory is set aside for such a promise; what follows is only counted.
        n_lines = sum(1 for _, line in reader if line.strip())
        raise InputError(
            reader.file,
            line=reader.line_no,
            found=f"the end of the file after {n_lines} more line{'s' * (n_lines != 1)}",
            expected=f"{n_r * n_wann**2} matrix elements ({n_r} R vectors of {n_wann} x {n_wann})",
            todo=COPY_AGAIN,
        )
    return HamiltonianCounts(n_wann, n_r, degeneracies)


def allocate_hamiltonian(reader: LineReader, n_r: int, n_wann: int) -> ComplexArray:
    """Room for H(R), (n_r, n_wann, n_wann); the system commits memory only as it is filled."""
    try:
        return np.empty((n_r, n_wann, n_wann), dtype=np.complex128)
    except MemoryError:
        raise InputError(
            reader.file,
            found=f"{n_r} R vectors of {n_wann} x {n_wann} elements",
            expected=f"no more than memory holds ({16e-9 * n_r * n_wann**2:.1f} GB are needed)",
            todo="use a machine with more memory",
        ) from None


def check_nothing_follows(reader: LineReader, n_elements: int) -> None:
    """Only blank lines and comments (# or !) may follow the last matrix element.

    Raises
    ------
    InputError
        Anything else follows.
    """
    for line_no, line in reader:
        text = line.strip()
        if text and not text.startswith((b"#", b"!")):
            raise InputError(
                reader.file,
                line=line_no,
                found=f"{quoted(text)} after the last of {n_elements} matrix elements",
                expected="the end of the file",
                todo="check num_wann and nrpts at the top of the file, and the file for damage",
            )


def _read_count(reader: LineReader, meaning: str) -> int:
    """A line with one positive integer, perhaps followed by a comment."""
    line = _next_filled_line(reader, meaning)
    words = line.split(b"!")[0].split(b"#")[0].split()
    value = _positive(words[0]) if len(words) == 1 else 0
    if value:
        return value
    raise InputError(
        reader.file,
        line=reader.line_no,
        found=quoted(line),
        expected=f"{meaning}, a positive integer",
        todo=_CHECK_KIND,
    )


def _read_degeneracies(reader: LineReader, n_r: int) -> IntArray:
    """The list of n_r positive integers, over as many lines as it takes."""
    values: list[int] = []
    while len(values) < n_r:
        line = _next_filled_line(reader, f"{n_r} degeneracies")
        words = line.split()
        if b"." in line and values:
            break
        numbers = [_positive(word) for word in words]
        if not all(numbers):
            wrong = words[numbers.index(0)]
            raise InputError(
                reader.file,
                line=reader.line_no,
                found=f"{quoted(wrong)} in the list of degeneracies",
                expected=f"{n_r} positive integers",
                todo="check nrpts above the list, and the file for damage",
            )
        values += numbers
    if len(values) != n_r:
        raise InputError(
            reader.file,
            line=reader.line_no,
            found=f"a list of {len(values)} degeneracies",
            expected=f"{n_r}, as nrpts above it says",
            todo="check nrpts, and the file for damage",
        )
    return np.array(values, dtype=np.int64)


def _next_filled_line(reader: LineReader, expected: str) -> bytes:
    for _, line in reader:
        if line.strip():
            return line
    raise InputError(
        reader.file,
        line=reader.line_no,
        found="the end of the file",
        expected=expected,
        todo=_CHECK_KIND,
    )


def _positive(word: bytes) -> int:
    """The value of a positive integer of sensible size, else 0."""
    return int(word) if word.isdigit() and len(word) <= _MAX_DIGITS else 0
