"""Energies to compare with: `.eig` on the coarse mesh, `_band.dat` and `_band.kpt` along a path."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.errors import InputError, quoted
from topovet.intake.number_table import read_table
from topovet.intake.opening import read_lines
from topovet.intake.records import BandFile, EigFile

MAX_BYTES = 2**26
"""Largest file read, uncompressed: about two million energies."""

PATH_TOLERANCE = 1e-4
"""Largest difference of the path coordinate of one k-point between bands, 1/angstrom."""

_COPY_EIG = "copy the file of the same calculation again"
_COPY_BANDS = "copy _band.dat and _band.kpt of one Wannier90 run again, or remove both"


def read_eig(path: str | Path, *, n_bands: int | None = None, n_k: int | None = None) -> EigFile:
    """First-principles energies: lines of band, k-point, energy in eV, in any order.

    Parameters
    ----------
    path
        The file.
    n_bands, n_k
        Bands and k-points it must hold, where that is known (`num_bands`, `mp_grid`).

    Returns
    -------
    EigFile

    Raises
    ------
    InputError
        A line that is not a band, a k-point and an energy; one listed twice; missing ones.
    """
    lines = _without_blank_end(read_lines(path, max_bytes=MAX_BYTES))
    table = read_table(
        path, lines, first_line=1, columns=(3,), row="a band, a k-point and an energy"
    )
    bands, k_points = _labels(path, lines, table)
    bands_found, k_found = int(bands.max(initial=-1)) + 1, int(k_points.max(initial=-1)) + 1
    for found, wanted, what in ((bands_found, n_bands, "bands"), (k_found, n_k, "k-points")):
        if wanted is not None and found != wanted:
            raise InputError(
                path, found=f"{found} {what}", expected=f"{wanted} {what}", todo=_COPY_EIG
            )
    flat = k_points * bands_found + bands
    _check_each_once(path, lines, flat, bands_found, k_found)
    energies = np.empty(len(table))
    energies[flat] = table[:, 2]
    return EigFile(str(path), energies.reshape(k_found, bands_found))


def read_bands(
    band_path: str | Path, kpt_path: str | Path, *, n_wann: int | None = None
) -> BandFile:
    """Wannier90's interpolated bands: the energies of one file at the k-points of the other.

    Parameters
    ----------
    band_path
        `_band.dat`: for each band a block of lines "path coordinate, energy", blocks apart by
        blank lines; a third column (projections) is ignored.
    kpt_path
        `_band.kpt`: the number of k-points, then fractional coordinates and a weight.
    n_wann
        Number of bands, where known.

    Returns
    -------
    BandFile

    Raises
    ------
    InputError
        Either file is damaged, or the two do not belong together.
    """
    k_frac = _read_path(kpt_path)
    lines = read_lines(band_path, max_bytes=MAX_BYTES)
    blocks: list[FloatArray] = []
    for start, stop in _blocks(lines):
        if stop - start != len(k_frac):
            raise InputError(
                band_path,
                line=stop,
                found=f"{stop - start} energies of band {len(blocks) + 1}",
                expected=f"{len(k_frac)}, one for each k-point of {kpt_path}",
                todo=_COPY_BANDS,
            )
        block = read_table(
            band_path,
            lines[start:stop],
            first_line=start + 1,
            columns=(2, 3),
            row="a path coordinate and an energy",
        )
        _check_path_coordinate(band_path, start, block[:, 0], blocks[0] if blocks else None)
        blocks.append(block)
    if not blocks or (n_wann is not None and len(blocks) != n_wann):
        raise InputError(
            band_path,
            found=f"{len(blocks)} bands",
            expected=f"{n_wann or 'some'} bands",
            todo=_COPY_BANDS,
        )
    energies = np.stack([block[:, 1] for block in blocks], axis=1)
    return BandFile(str(band_path), k_frac, energies)


def _without_blank_end(lines: list[str]) -> list[str]:
    stop = len(lines)
    while stop and not lines[stop - 1].strip():
        stop -= 1
    return lines[:stop]


def _labels(path: str | Path, lines: list[str], table: FloatArray) -> tuple[IntArray, IntArray]:
    """0-based band and k-point of each line; neither can exceed the number of lines."""
    labels = table[:, :2]
    wrong = ((labels != np.rint(labels)) | (labels < 1) | (labels > len(table))).any(axis=1)
    if wrong.any() or len(table) == 0:
        row = int(np.argmax(wrong)) if wrong.any() else 0
        raise InputError(
            path,
            line=row + 1,
            found=quoted(lines[row].strip()) if lines else "no energies",
            expected="a band and a k-point counted from 1, and an energy",
            todo=_COPY_EIG,
        )
    whole = np.rint(labels).astype(np.int64) - 1
    return whole[:, 0], whole[:, 1]


def _check_each_once(
    path: str | Path, lines: list[str], flat: IntArray, n_bands: int, n_k: int
) -> None:
    first = np.unique(flat, return_index=True)[1]
    if len(first) < len(flat):
        row = int(np.setdiff1d(np.arange(len(flat)), first)[0])
        raise InputError(
            path,
            line=row + 1,
            found=f"{quoted(lines[row].strip())}, whose band and k-point stood there before",
            expected="one energy for each band and k-point",
            todo=_COPY_EIG,
        )
    if len(flat) != n_bands * n_k:
        raise InputError(
            path,
            line=len(lines),
            found=f"{len(flat)} energies at the end of the file",
            expected=f"{n_bands} bands at each of {n_k} k-points, {n_bands * n_k} in all",
            todo=_COPY_EIG,
        )


def _read_path(path: str | Path) -> FloatArray:
    """(n_k, 3) fractional k-points of a `_band.kpt`."""
    lines = _without_blank_end(read_lines(path, max_bytes=MAX_BYTES))
    first = lines[0].strip() if lines else ""
    if not (first.isascii() and first.isdigit() and 0 < len(first) < 9):
        raise InputError(
            path, line=1, found=quoted(first), expected="the number of k-points", todo=_COPY_BANDS
        )
    if len(lines) - 1 != int(first):
        raise InputError(
            path,
            line=len(lines),
            found=f"{len(lines) - 1} k-points",
            expected=f"{int(first)}, as line 1 says",
            todo=_COPY_BANDS,
        )
    table = read_table(
        path, lines[1:], first_line=2, columns=(4, 3), row="three coordinates and a weight"
    )
    return np.ascontiguousarray(table[:, :3])


def _blocks(lines: list[str]) -> list[tuple[int, int]]:
    """Runs of lines that are not blank, as (start, stop)."""
    filled = np.array([bool(line.strip()) for line in lines], dtype=np.int8)
    edges = np.flatnonzero(np.diff(filled, prepend=0, append=0))
    return [(int(a), int(b)) for a, b in edges.reshape(-1, 2)]


def _check_path_coordinate(
    path: str | Path, start: int, coordinate: FloatArray, first_block: FloatArray | None
) -> None:
    """The path runs forward, and alike for every band."""
    if first_block is None:
        wrong = np.diff(coordinate, prepend=coordinate[:1]) < -PATH_TOLERANCE
        expected = "a path coordinate that does not decrease"
    else:
        wrong = np.abs(coordinate - first_block[:, 0]) > PATH_TOLERANCE
        expected = "the path coordinate that the first band has there"
    if wrong.any():
        row = int(np.argmax(wrong))
        raise InputError(
            path,
            line=start + row + 1,
            found=f"path coordinate {coordinate[row]:.6f}",
            expected=expected,
            todo=_COPY_BANDS,
        )
