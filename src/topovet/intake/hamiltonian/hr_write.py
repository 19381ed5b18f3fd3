"""Writing `_hr.dat` as Wannier90 does."""

from __future__ import annotations

import gzip
import os
import uuid
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import BinaryIO, cast

import numpy as np

from topovet.arrays import ComplexArray, IntArray

_DEGENERACIES_PER_LINE = 15
_INTEGER_WIDTH = 5
_USUAL_DECIMALS = 6
_USUAL_WIDTH = 12
_MOST_DECIMALS = 15


def write_hr(
    path: str | Path,
    r_cells: IntArray,
    h_r: ComplexArray,
    *,
    degeneracies: IntArray | None = None,
    header: str = "written by topovet",
    decimals: int = _USUAL_DECIMALS,
) -> None:
    """Write H_mn(R) in Wannier90's format, whole or not at all.

    The file is written under another name beside its place and then renamed.

    Parameters
    ----------
    path
        Compressed if its name ends in `.gz`.
    r_cells
        (n_r, 3) integer lattice vectors.
    h_r
        (n_r, n_wann, n_wann) eV, element [r, m, n] = <m 0|H|n R>, not divided by degeneracies.
    degeneracies
        (n_r,) positive integers; all 1 if absent.
    header
        First line.
    decimals
        1 to 15 digits after the point. 6 gives Wannier90's columns F12.6; any other number gives
        columns seven characters wider than it. All hold -9999 to 99999 eV.

    Raises
    ------
    ValueError
        Arrays that do not fit together, or something that the columns cannot hold: where Fortran
        would print asterisks nothing is written.
    """
    weights = np.ones(len(r_cells), dtype=np.int64) if degeneracies is None else degeneracies
    width = _USUAL_WIDTH if decimals == _USUAL_DECIMALS else decimals + 7
    _check_arrays(r_cells, h_r, weights, header, decimals)
    _check_integers(r_cells, h_r.shape[1], weights)
    # Only Wannier90's own columns are known to be cut right where numbers touch.
    _check_numbers(h_r, decimals, width if decimals == _USUAL_DECIMALS else width - 1)
    with _replaced_when_done(Path(path)) as stream:
        stream.write(_head(header, h_r.shape[1], weights))
        for text in _column_texts(r_cells, h_r, f"%{width}.{decimals}f"):
            stream.write(text)


def _check_arrays(
    r_cells: IntArray, h_r: ComplexArray, weights: IntArray, header: str, decimals: int
) -> None:
    if h_r.ndim != 3 or h_r.shape[1] != h_r.shape[2] or not h_r.size:
        raise ValueError(f"h_r must be (n_r, n_wann, n_wann) and not empty, not {h_r.shape}")
    if r_cells.shape != (len(h_r), 3) or weights.shape != (len(h_r),):
        raise ValueError(
            f"{len(h_r)} R vectors in h_r, but r_cells is {r_cells.shape} "
            f"and degeneracies {weights.shape}"
        )
    if not np.issubdtype(r_cells.dtype, np.integer) or not np.issubdtype(weights.dtype, np.integer):
        raise ValueError("r_cells and degeneracies must be integer arrays")
    if not 1 <= decimals <= _MOST_DECIMALS:
        raise ValueError(f"decimals must be 1 to {_MOST_DECIMALS}, not {decimals}")
    if not header.isprintable():
        raise ValueError("the header must be one line of printable text")


def _check_integers(r_cells: IntArray, n_wann: int, weights: IntArray) -> None:
    # One character less than the column has, so that columns stay apart.
    most = 10 ** (_INTEGER_WIDTH - 1) - 1
    if n_wann > most or weights.max() > most or weights.min() < 1:
        raise ValueError(f"num_wann and degeneracies must be 1 to {most} to fit their columns")
    if np.abs(r_cells).max() > most // 10:
        raise ValueError(f"components of R must be within ±{most // 10} to fit their columns")


def _check_numbers(h_r: ComplexArray, decimals: int, room: int) -> None:
    for part in (h_r.real, h_r.imag):
        if not np.isfinite(part).all():
            raise ValueError("h_r has elements that are not finite")
        for extreme in (part.min(), part.max()):
            if len(f"{extreme:.{decimals}f}") > room:
                raise ValueError(
                    f"{extreme:.{decimals}f} eV does not fit a column of {room} characters: "
                    "shift the zero of energy, or write fewer decimals"
                )


def _head(header: str, n_wann: int, weights: IntArray) -> bytes:
    lines = [f" {header}", f"{n_wann:12d}", f"{len(weights):12d}"]
    for start in range(0, len(weights), _DEGENERACIES_PER_LINE):
        row = weights[start : start + _DEGENERACIES_PER_LINE].tolist()
        lines.append("".join(f"{weight:{_INTEGER_WIDTH}d}" for weight in row))
    return ("\n".join(lines) + "\n").encode()


def _column_texts(r_cells: IntArray, h_r: ComplexArray, number: str) -> Iterator[bytes]:
    """The lines of one R and n at a time, m running."""
    integer = f"%{_INTEGER_WIDTH}d"
    numbers = [integer % i for i in range(1, h_r.shape[1] + 1)]
    for r_cell, block in zip(r_cells.tolist(), h_r, strict=True):
        r_text = "".join(integer % component for component in r_cell)
        for n_text, column in zip(numbers, block.T, strict=True):
            lines = "".join(f"{r_text}{m_text}{n_text}{number}{number}\n" for m_text in numbers)
            values = np.ascontiguousarray(column).view(np.float64).tolist()
            yield (lines % tuple(values)).encode()


@contextmanager
def _replaced_when_done(path: Path) -> Iterator[BinaryIO]:
    """A stream whose bytes become the file only if nothing goes wrong."""
    part = path.with_name(f".{path.name}.{uuid.uuid4().hex}.part")
    try:
        with part.open("xb") as raw:
            if path.suffix == ".gz":
                # No name and no time inside: the same Hamiltonian gives the same bytes.
                with gzip.GzipFile(filename="", mode="wb", fileobj=raw, mtime=0) as packed:
                    yield cast(BinaryIO, packed)
            else:
                yield raw
            raw.flush()
            os.fsync(raw.fileno())
        part.replace(path)
    finally:
        part.unlink(missing_ok=True)
