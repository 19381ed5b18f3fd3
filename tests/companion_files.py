"""Small companion files of a case, as text, and the Hamiltonian they belong to."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
import pytest

from topovet.arrays import IntArray
from topovet.demo import writer
from topovet.demo.writer import wsvec_records as records_of
from topovet.errors import InputError
from topovet.intake.records import HamiltonianFile, WsShifts

__all__ = [
    "HEADER",
    "Refusal",
    "hermitian_file",
    "mesh_cells",
    "message_of",
    "records_of",
    "wsvec_text",
]

HEADER = "## written on  1Dec2026 at 07:19:57  with use_ws_distance=.true."


def hermitian_file(
    r_cells: Sequence[Sequence[int]], n_wann: int, *, seed: int = 0, decimals: int = 6
) -> HamiltonianFile:
    """A Hamiltonian file with a random Hermitian H(R), rounded to the decimals."""
    rng = np.random.default_rng(seed)
    r = np.array(r_cells, dtype=np.int64).reshape(-1, 3)
    h = rng.normal(size=(len(r), n_wann, n_wann)) + 1j * rng.normal(size=(len(r), n_wann, n_wann))
    rows = {tuple(vector): row for row, vector in enumerate(r.tolist())}
    for vector, row in rows.items():
        partner = rows.get(tuple(-x for x in vector))
        if partner is not None:
            h[partner] = h[row].conj().T if partner != row else (h[row] + h[row].conj().T) / 2
    return HamiltonianFile(
        "GX_hr.dat",
        "written by hand",
        np.ones(len(r), dtype=np.int64),
        r,
        h.round(decimals),
        decimals,
        "fixed-columns",
    )


def wsvec_text(shifts: WsShifts) -> str:
    """A `_wsvec.dat` with the header of a real run."""
    return writer.wsvec_text(shifts, HEADER)


def mesh_cells(mp_grid: tuple[int, int, int]) -> IntArray:
    """One R for each point of the mesh, around the origin."""
    ranges = [np.arange(n) - n // 2 for n in mp_grid]
    return np.stack(np.meshgrid(*ranges, indexing="ij"), axis=-1).reshape(-1, 3).astype(np.int64)


def message_of(error: InputError, folder: Path) -> str:
    """The sentence without the folder, so that it can be compared word for word."""
    return str(error).replace(f"{folder}/", "").replace(str(folder), "CASE")


class Refusal:
    """Runs a reader that must refuse, and keeps the sentence."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def of(self, reader: object, *arguments: object, **options: object) -> str:
        with pytest.raises(InputError) as caught:
            reader(*arguments, **options)  # type: ignore[operator]
        return message_of(caught.value, self.folder)
