"""`_centres.xyz`: the centres of the Wannier functions."""

from __future__ import annotations

from pathlib import Path

from topovet.errors import InputError, quoted
from topovet.intake.number_table import read_table
from topovet.intake.opening import read_lines
from topovet.intake.records import CentresFile

_LABEL = "X"
_AGAIN = "copy the file again or let Wannier90 write it again (write_xyz = .true.)"


def read_centres(path: str | Path, n_wann: int) -> CentresFile:
    """Centres of an xyz file as Wannier90 writes it: `X` rows first, then the atoms.

    Parameters
    ----------
    path
        The file.
    n_wann
        Wannier functions of the Hamiltonian it belongs to.

    Returns
    -------
    CentresFile

    Raises
    ------
    InputError
        Cut short, overlong, not numbers, or centres of another number of Wannier functions.
    """
    lines = read_lines(path)
    while lines and not lines[-1].strip():
        lines.pop()
    n_rows = _declared_rows(path, lines)
    if len(lines) != n_rows + 2:
        raise InputError(
            path,
            line=len(lines),
            found=f"{max(len(lines) - 2, 0)} rows after the comment line",
            expected=f"{n_rows}, as line 1 says",
            todo=_AGAIN,
        )
    words = [line.split(maxsplit=1) for line in lines[2:]]
    is_centre = [bool(row) and row[0] == _LABEL for row in words]
    n_centres = is_centre.index(False) if False in is_centre else len(is_centre)
    _check_labels(path, lines, is_centre, n_centres)
    if n_centres != n_wann:
        raise InputError(
            path,
            line=2 + n_centres,
            found=f"{n_centres} centres ({_LABEL} rows)",
            expected=f"{n_wann}, one for each Wannier function of the Hamiltonian",
            todo="put the file of the same Wannier90 run here, or remove it",
        )
    positions = [row[1] if len(row) > 1 else "" for row in words]
    table = read_table(path, positions, first_line=3, columns=(3,), row="a label, x, y and z")
    return CentresFile(str(path), table[:n_wann])


def _declared_rows(path: str | Path, lines: list[str]) -> int:
    first = lines[0].strip() if lines else ""
    if not (first.isascii() and first.isdigit() and len(first) < 9):
        raise InputError(
            path, line=1, found=quoted(first), expected="the number of rows", todo=_AGAIN
        )
    return int(first)


def _check_labels(
    path: str | Path, lines: list[str], is_centre: list[bool], n_centres: int
) -> None:
    if any(is_centre[n_centres:]):
        row = is_centre.index(True, n_centres)
        raise InputError(
            path,
            line=3 + row,
            found=f"{quoted(lines[2 + row].strip())} below the atoms",
            expected=f"all {_LABEL} rows before the atoms",
            todo=_AGAIN,
        )
