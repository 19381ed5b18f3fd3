"""Cell, atoms and k-points of a `.win` file."""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np
from ase.data import chemical_symbols

from topovet.arrays import FloatArray
from topovet.errors import InputError, quoted
from topovet.intake.wannier_input.win_grammar import Block, Line, WinText
from topovet.intake.wannier_input.win_values import read_floats, split_items
from topovet.units import BOHR_ANGSTROM

FLAT_CELL = 1e-6
"""Volume over the product of the edge lengths below which a cell counts as singular."""

_UNITS = {"ang": 1.0, "angstrom": 1.0, "bohr": BOHR_ANGSTROM}
_ELEMENTS = frozenset(chemical_symbols)
_LABEL = re.compile(r"([A-Za-z]{1,2})[!-~]{0,18}")
"""Printable, since messages list the labels; Wannier90 keeps 20 characters (from memory)."""


@dataclass(frozen=True, slots=True, eq=False)
class WinAtoms:
    """Atoms in file order.

    Attributes
    ----------
    labels
        As written, in lower case ("bi1"); projections refer to them.
    symbols
        Chemical symbols ("Bi").
    positions_frac
        (n_atoms, 3) fractional.
    """

    labels: tuple[str, ...]
    symbols: tuple[str, ...]
    positions_frac: FloatArray


def split_unit(block: Block) -> tuple[float, tuple[Line, ...]]:
    """Length unit in angstrom and the lines after it; angstrom where the block names none."""
    first = block.lines[0].text.lower() if block.lines else ""
    if first in _UNITS:
        return _UNITS[first], block.lines[1:]
    return 1.0, block.lines


def read_cell(text: WinText) -> FloatArray | None:
    """Lattice vectors (3, 3) in angstrom, as rows; None without `unit_cell_cart`.

    Raises
    ------
    InputError
        Not three finite vectors, an unknown unit, or a cell without volume.
    """
    block = text.block("unit_cell_cart")
    if block is None:
        return None
    scale, lines = split_unit(block)
    _check_unit(text.file, block, lines)
    rows = [
        read_floats(text.file, line, split_items(line.text), "a lattice vector") for line in lines
    ]
    if len(rows) != 3:
        raise InputError(
            text.file,
            line=block.number,
            found=f"{len(rows)} lattice vectors in unit_cell_cart",
            expected="three",
            todo="correct the block",
        )
    cell = scale * np.array(rows)
    volume = abs(float(np.linalg.det(cell)))
    if not volume > FLAT_CELL * float(np.prod(np.linalg.norm(cell, axis=1))):
        raise InputError(
            text.file,
            line=block.number,
            found="lattice vectors that lie in a plane",
            expected="a cell with a volume",
            todo="correct unit_cell_cart",
        )
    return cell


def read_atoms(text: WinText, cell: FloatArray | None) -> WinAtoms:
    """Atoms of `atoms_frac` or `atoms_cart`; none where both blocks are missing.

    Raises
    ------
    InputError
        Both blocks, a line that is not a label and three numbers, a label that starts with no
        chemical symbol, an unknown unit, or Cartesian positions without a cell.
    """
    fractional, cartesian = text.block("atoms_frac"), text.block("atoms_cart")
    if fractional is not None and cartesian is not None:
        raise InputError(
            text.file,
            line=max(fractional.number, cartesian.number),
            found="atoms_frac and atoms_cart together",
            expected="one of the two blocks",
            todo="delete the other one",
        )
    if fractional is not None:
        return _atoms(text.file, fractional.lines, np.eye(3))
    if cartesian is None:
        return WinAtoms((), (), np.zeros((0, 3)))
    if cell is None:
        raise InputError(
            text.file,
            line=cartesian.number,
            found="atoms_cart without a cell",
            expected="the block unit_cell_cart",
            todo="add the block",
        )
    scale, lines = split_unit(cartesian)
    _check_unit(text.file, cartesian, lines)
    return _atoms(text.file, lines, np.asarray(scale * np.linalg.inv(cell)))


def read_kpoints(text: WinText, mp_grid: tuple[int, int, int] | None) -> FloatArray | None:
    """Coarse mesh (n_k, 3), fractional; None without the `kpoints` block.

    A fourth number on a line, the weight that other programs write, is read and left out.

    Raises
    ------
    InputError
        A line without three or four finite numbers, or another number of points than mp_grid has.
    """
    block = text.block("kpoints")
    if block is None:
        return None
    points = []
    for line in block.lines:
        items = split_items(line.text)
        count = 4 if len(items) == 4 else 3
        what = "a k-point (a fourth may give its weight)"
        points.append(read_floats(text.file, line, items, what, count=count)[:3])
    expected = None if mp_grid is None else mp_grid[0] * mp_grid[1] * mp_grid[2]
    if expected is not None and expected != len(points):
        raise InputError(
            text.file,
            line=block.number,
            found=f"{len(points)} k-points in the block kpoints",
            expected=f"{expected} for the mp_grid {mp_grid}",
            todo="check that the block is complete, or correct mp_grid",
        )
    return np.array(points, dtype=float).reshape(-1, 3)


def _check_unit(file: str, block: Block, lines: tuple[Line, ...]) -> None:
    """Refuse a lone word where the unit stands."""
    if lines and len(block.lines) == len(lines) and re.fullmatch(r"[A-Za-z]\w*", lines[0].text):
        raise InputError(
            file,
            line=lines[0].number,
            found=f"{quoted(lines[0].text)} as the unit of {block.name}",
            expected="ang or bohr",
            todo="correct the unit",
        )


def _atoms(file: str, lines: tuple[Line, ...], to_frac: FloatArray) -> WinAtoms:
    labels: list[str] = []
    symbols: list[str] = []
    rows: list[list[float]] = []
    for line in lines:
        label, *numbers = split_items(line.text)
        symbols.append(_symbol(file, line, label))
        labels.append(label.lower())
        rows.append(read_floats(file, line, numbers, "the position, after the label"))
    positions = np.array(rows, dtype=float).reshape(-1, 3) @ to_frac
    return WinAtoms(tuple(labels), tuple(symbols), positions)


def _symbol(file: str, line: Line, label: str) -> str:
    """Wannier90 takes the first letter and, if it is one, the second (from memory)."""
    match = _LABEL.fullmatch(label)
    symbol = match[1].capitalize() if match else ""
    if symbol not in _ELEMENTS:
        raise InputError(
            file,
            line=line.number,
            found=f"the atom label {quoted(label)}",
            expected="a chemical symbol, which digits may follow",
            todo="rename the atom",
        )
    return symbol
