"""What the small files of a case say together: one crystal, one basis, one mesh."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.errors import InputError
from topovet.intake.records import (
    CaseFiles,
    CaseSettings,
    DeclaredOrbital,
    HamiltonianFile,
    StructureFile,
    WinFile,
)
from topovet.model.cell_relation import CellRelation, atoms_in_cell, relate_cells
from topovet.model.crystal import Crystal

SAME_CELL_ANG = 1e-3
"""Lattice vectors of two files that differ by less are the same (files carry few digits)."""


@dataclass(frozen=True, slots=True, eq=False)
class Declarations:
    """The case as declared; everything here is still to be tested on the Hamiltonian.

    Attributes
    ----------
    name
        From case.toml, else the seedname.
    crystal
        Cell of the Hamiltonian, its atoms, its periodic directions.
    spinful
        From the .win file; None without one.
    mp_grid
        Coarse mesh; None where unknown.
    orbitals
        Declared Wannier functions; empty where there are none, with the reason.
    settings
        case.toml.
    structure_cell
        Cell of the structure file where its lengths or angles disagree with the Hamiltonian's cell;
        None where they agree or no file is there to compare.
    structure_relation
        How that cell is related to the Hamiltonian's; None likewise. Where it is the same lattice
        or a supercell of it, the atoms are told in the Hamiltonian's cell.
    structure_offset_ang
        Largest distance of an atom of the .win file from the nearest one of its kind in the
        structure file; None where there is nothing to compare, infinite for another composition.
    structure_file, win_file
        Their names, "" where absent.
    win_fermi_ev
        fermi_energy of the .win file.
    use_ws_distance, ws_distance_tol, ws_search_size
        As in the .win file, or Wannier90's defaults.
    """

    name: str
    crystal: Crystal
    spinful: bool | None
    mp_grid: tuple[int, int, int] | None
    orbitals: tuple[DeclaredOrbital, ...]
    undeclared_reason: str
    settings: CaseSettings
    structure_cell: FloatArray | None
    structure_offset_ang: float | None
    structure_file: str
    win_file: str
    win_fermi_ev: float | None
    use_ws_distance: bool
    ws_distance_tol: float
    ws_search_size: tuple[int, int, int]
    structure_relation: CellRelation | None = None


def declare(
    files: CaseFiles,
    hamiltonian: HamiltonianFile,
    win: WinFile | None,
    structure: StructureFile | None,
    settings: CaseSettings,
) -> Declarations:
    """Bring the files together.

    The cell is that of the .win file, else of the _tb.dat file, else of the structure file; atoms
    are those of the .win file, else of the structure file.

    Raises
    ------
    InputError
        No file gives the cell, num_wann disagrees with the Hamiltonian, or the dimension is not
        2 or 3.
    """
    _check_num_wann(files, hamiltonian, win)
    structure_file = "" if structure is None else Path(structure.file).name
    cell, structure_cell = _cell(files, hamiltonian, win, structure)
    relation = None
    if structure is not None and structure_cell is not None:
        relation = relate_cells(structure_cell, cell)
        structure = _told_in(cell, structure, relation)
    symbols, positions = _atoms(cell, win, structure)
    mp_grid = None if win is None else win.mp_grid
    periodic = _periodic(files, settings.dimension, mp_grid, hamiltonian.r_cells)
    return Declarations(
        name=settings.name or files.seedname,
        crystal=Crystal(cell, symbols, positions, periodic),
        spinful=None if win is None else win.spinors,
        mp_grid=mp_grid,
        orbitals=() if win is None else win.orbitals,
        undeclared_reason=_undeclared(win),
        settings=settings,
        structure_cell=structure_cell,
        structure_offset_ang=_atom_offset(win, structure),
        structure_file=structure_file,
        win_file="" if win is None else Path(win.file).name,
        win_fermi_ev=None if win is None else win.fermi_energy_ev,
        use_ws_distance=True if win is None else win.use_ws_distance,
        ws_distance_tol=1e-5 if win is None else win.ws_distance_tol,
        ws_search_size=(2, 2, 2) if win is None else win.ws_search_size,
        structure_relation=relation,
    )


def _check_num_wann(files: CaseFiles, hamiltonian: HamiltonianFile, win: WinFile | None) -> None:
    if win is not None and win.num_wann is not None and win.num_wann != hamiltonian.n_wann:
        raise InputError(
            win.file,
            found=f"num_wann = {win.num_wann}",
            expected=f"{hamiltonian.n_wann}, the number in {hamiltonian.file}",
            todo="put files of the same Wannier90 run into the case folder",
        )


def _cell(
    files: CaseFiles,
    hamiltonian: HamiltonianFile,
    win: WinFile | None,
    structure: StructureFile | None,
) -> tuple[FloatArray, FloatArray | None]:
    """Cell of the Hamiltonian, and the structure file's where that is another one."""
    own = win.cell if win is not None and win.cell is not None else hamiltonian.cell
    if own is None and structure is None:
        raise InputError(
            files.folder,
            found="no file with the lattice vectors",
            expected=f"unit_cell_cart in {files.seedname}.win, a _tb.dat file or a structure file",
            todo="add the .win file of the run, or a POSCAR in the cell of the run",
        )
    if own is None:
        assert structure is not None
        return structure.cell, None
    if structure is None or _same_lattice(own, structure.cell):
        return own, None
    return own, structure.cell


def _told_in(
    cell: FloatArray, structure: StructureFile, relation: CellRelation
) -> StructureFile | None:
    """The structure in the Hamiltonian's cell; None where it does not fit into it."""
    atoms = atoms_in_cell(
        structure.symbols, structure.positions_frac, structure.cell, cell, relation
    )
    if atoms is None:
        return None
    return replace(structure, cell=cell, symbols=atoms[0], positions_frac=atoms[1])


def _same_lattice(cell: FloatArray, other: FloatArray) -> bool:
    """Equal lengths and angles; a rotation of the whole crystal does not matter here."""
    metric, other_metric = cell @ cell.T, other @ other.T
    longest = np.sqrt(np.diag(metric).max())
    return bool(np.abs(metric - other_metric).max() <= 2 * longest * SAME_CELL_ANG)


def _atom_offset(win: WinFile | None, structure: StructureFile | None) -> float | None:
    if win is None or structure is None or not win.symbols:
        return None
    if Counter(win.symbols) != Counter(structure.symbols):
        return float("inf")
    difference = win.positions_frac[:, None, :] - structure.positions_frac[None, :, :]
    distance = np.linalg.norm((difference - np.round(difference)) @ structure.cell, axis=2)
    unlike = np.array(win.symbols)[:, None] != np.array(structure.symbols)[None, :]
    return float(np.where(unlike, np.inf, distance).min(axis=1).max())


def _atoms(
    cell: FloatArray, win: WinFile | None, structure: StructureFile | None
) -> tuple[tuple[str, ...], FloatArray]:
    if win is not None and win.symbols:
        return win.symbols, win.positions_frac
    if structure is not None and _same_lattice(cell, structure.cell):
        return structure.symbols, structure.positions_frac
    return (), np.empty((0, 3))


def _undeclared(win: WinFile | None) -> str:
    if win is None:
        return "there is no .win file, so no projections are declared"
    return win.undeclared_reason or ""


def _periodic(
    files: CaseFiles,
    dimension: int | None,
    mp_grid: tuple[int, int, int] | None,
    r_cells: IntArray,
) -> tuple[bool, bool, bool]:
    """Periodic directions: those with more than one mesh point, or with any R along them."""
    a, b, c = (
        [n > 1 for n in mp_grid] if mp_grid is not None else np.any(r_cells != 0, axis=0).tolist()
    )
    if dimension == 3:
        return True, True, True
    if a + b + c == 2 or (dimension is None and a + b + c == 3):
        return bool(a), bool(b), bool(c)
    raise InputError(
        files.folder,
        found=f"{a + b + c} periodic directions ("
        + (f"mp_grid {mp_grid}" if mp_grid else "those with R vectors")
        + ")",
        expected="2 or 3" if dimension is None else f"{dimension}, as case.toml says",
        todo="state dimension in case.toml; a 2D case has one mesh point along its normal",
    )
