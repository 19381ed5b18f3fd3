"""`.win` file -> the part of it that vetting needs."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from topovet.errors import InputError
from topovet.intake.opening import read_lines
from topovet.intake.records import WinFile
from topovet.intake.wannier_input.projections import read_projections
from topovet.intake.wannier_input.win_grammar import WinText, lex_win
from topovet.intake.wannier_input.win_structure import read_atoms, read_cell, read_kpoints
from topovet.intake.wannier_input.win_values import (
    read_floats,
    read_int,
    read_ints,
    read_logical,
    read_ranges,
    split_items,
)

MAX_WIN_BYTES = 64 * 1024 * 1024
"""Largest `.win` file that is opened; a 100 x 100 x 100 mesh takes about 50 MB."""

MAX_WS_SEARCH = 20
"""Largest ws_search_size; Wannier90's default is 2."""


def read_win(path: str | Path) -> WinFile:
    """Read a Wannier90 input file.

    Keywords that vetting does not need, among them fermi_energy_min and fermi_energy_max, are
    passed over.

    Parameters
    ----------
    path
        The file; plain or gzipped.

    Returns
    -------
    WinFile
        Blocks and keywords that are missing are None or Wannier90's default (spinors false,
        use_ws_distance true with tolerance 1e-5 and search size 2).

    Raises
    ------
    InputError
        The file cannot be opened, or breaks Wannier90's grammar.
    """
    return parse_win(read_lines(path, max_bytes=MAX_WIN_BYTES), str(path))


def parse_win(lines: Sequence[str], file: str) -> WinFile:
    """The same for the lines of a file; `file` is its name in messages.

    Raises
    ------
    InputError
        The lines break Wannier90's grammar.
    """
    text = lex_win(lines, file)
    cell = read_cell(text)
    atoms = read_atoms(text, cell)
    mp_grid = _triple(text, "mp_grid", most=10**4)
    num_wann = _integer(text, "num_wann")
    spinors = _logical(text, "spinors", default=False)
    orbitals, undeclared_reason = read_projections(
        text, atoms, cell, spinors=spinors, num_wann=num_wann
    )
    return WinFile(
        file=file,
        cell=cell,
        symbols=atoms.symbols,
        positions_frac=atoms.positions_frac,
        spinors=spinors,
        num_wann=num_wann,
        num_bands=_num_bands(text, num_wann),
        mp_grid=mp_grid,
        kpoints_frac=read_kpoints(text, mp_grid),
        exclude_bands=_exclude_bands(text),
        fermi_energy_ev=_real(text, "fermi_energy"),
        use_ws_distance=_logical(text, "use_ws_distance", default=True),
        ws_distance_tol=_ws_distance_tol(text),
        ws_search_size=_ws_search_size(text),
        orbitals=orbitals,
        undeclared_reason=undeclared_reason,
    )


def _logical(text: WinText, name: str, *, default: bool) -> bool:
    line = text.keyword(name)
    return default if line is None else read_logical(text.file, line, name)


def _integer(text: WinText, name: str) -> int | None:
    line = text.keyword(name)
    return None if line is None else read_int(text.file, line, name, least=1)


def _real(text: WinText, name: str) -> float | None:
    line = text.keyword(name)
    if line is None:
        return None
    return read_floats(text.file, line, split_items(line.text), name, count=1)[0]


def _triple(text: WinText, name: str, *, most: int) -> tuple[int, int, int] | None:
    line = text.keyword(name)
    if line is None:
        return None
    a, b, c = read_ints(text.file, line, name, counts=(3,), least=1, most=most)
    return (a, b, c)


def _num_bands(text: WinText, num_wann: int | None) -> int | None:
    line = text.keyword("num_bands")
    if line is None:
        return None
    num_bands = read_int(text.file, line, "num_bands", least=1)
    if num_wann is not None and num_bands < num_wann:
        raise InputError(
            text.file,
            line=line.number,
            found=f"num_bands = {num_bands}",
            expected=f"at least num_wann = {num_wann}",
            todo="correct one of the two",
        )
    return num_bands


def _exclude_bands(text: WinText) -> tuple[int, ...]:
    line = text.keyword("exclude_bands")
    if line is None:
        return ()
    return tuple(sorted(number - 1 for number in read_ranges(text.file, line, "exclude_bands")))


def _ws_distance_tol(text: WinText) -> float:
    line, tolerance = text.keyword("ws_distance_tol"), _real(text, "ws_distance_tol")
    if line is not None and tolerance is not None and tolerance < 0:
        raise InputError(
            text.file,
            line=line.number,
            found=f"ws_distance_tol = {tolerance:g}",
            expected="a length of at least 0",
            todo="correct the line",
        )
    return 1e-5 if tolerance is None else tolerance


def _ws_search_size(text: WinText) -> tuple[int, int, int]:
    line = text.keyword("ws_search_size")
    if line is None:
        return (2, 2, 2)
    sizes = read_ints(text.file, line, "ws_search_size", counts=(1, 3), least=1, most=MAX_WS_SEARCH)
    a, b, c = sizes * 3 if len(sizes) == 1 else sizes
    return (a, b, c)
