"""Structure files, read through ASE."""

from __future__ import annotations

import io
import warnings
from pathlib import Path
from typing import Any

import ase.io
import numpy as np

from topovet.errors import InputError, quoted
from topovet.intake.opening import read_lines
from topovet.intake.records import StructureFile

MAX_BYTES = 2**21

MAX_ATOMS = 2000
"""Far beyond any cell with a Wannier Hamiltonian."""

SMALLEST_VOLUME = 1.0
"""Cubic angstrom; no cell with an atom in it is smaller."""

_FORMATS = {
    ".vasp": "vasp",
    ".poscar": "vasp",
    ".cif": "cif",
    ".xsf": "xsf",
    ".extxyz": "extxyz",
    ".xyz": "extxyz",
}
"""Suffix -> ASE's name of the format. Named, so that ASE never guesses from the contents."""

_OTHER_FORMAT = "give the structure as POSCAR or CIF, or remove it"


def read_structure(path: str | Path) -> StructureFile:
    """Cell and atoms of a structure file.

    Parameters
    ----------
    path
        POSCAR, CONTCAR or a file with one of the suffixes .vasp, .poscar, .cif, .xsf, .extxyz,
        .xyz; gzipped or not.

    Returns
    -------
    StructureFile
        What ASE warned about is kept in its notes.

    Raises
    ------
    InputError
        ASE cannot read it; not exactly one structure; no cell; sites that are partly occupied or
        shared, since a tight-binding Hamiltonian describes an ordered crystal.
    """
    format_name = _format_of(path)
    lines = read_lines(path, max_bytes=MAX_BYTES)
    _check_declared_atoms(path, lines, format_name)
    images, notes = _read_with_ase(path, "\n".join(lines) + "\n", format_name)
    if len(images) != 1:
        raise InputError(
            path, found=f"{len(images)} structures", expected="one", todo=_OTHER_FORMAT
        )
    atoms = images[0]
    _check_occupancy(path, atoms)
    cell, positions = np.array(atoms.cell[:], dtype=float), np.array(atoms.positions, dtype=float)
    if not (np.isfinite(cell).all() and abs(np.linalg.det(cell)) >= SMALLEST_VOLUME):
        raise InputError(
            path,
            found="no cell of three independent vectors",
            expected="a periodic structure",
            todo=_OTHER_FORMAT,
        )
    if not (0 < len(atoms) <= MAX_ATOMS and np.isfinite(positions).all()):
        raise InputError(
            path,
            found=f"{len(atoms)} atoms" if np.isfinite(positions).all() else "endless coordinates",
            expected=f"1 to {MAX_ATOMS} atoms with finite coordinates",
            todo=_OTHER_FORMAT,
        )
    return StructureFile(
        str(path),
        cell,
        tuple(str(symbol) for symbol in atoms.get_chemical_symbols()),
        positions @ np.linalg.inv(cell),
        notes,
    )


def _format_of(path: str | Path) -> str:
    name = Path(path).name.removesuffix(".gz")
    if name.startswith(("POSCAR", "CONTCAR")):
        return "vasp"
    suffix = Path(name).suffix
    if suffix in _FORMATS:
        return _FORMATS[suffix]
    raise InputError(
        path,
        found=f"a file named {quoted(name)}",
        expected=f"POSCAR, CONTCAR, or one of {', '.join(_FORMATS)}",
        todo=_OTHER_FORMAT,
    )


def _check_declared_atoms(path: str | Path, lines: list[str], format_name: str) -> None:
    """Refuse a promise of atoms that cannot follow: ASE would set memory or time aside for them."""
    places: dict[str, list[str]] = {
        "vasp": lines[5:7],
        "extxyz": [line for line in lines if len(line.split()) == 1],
    }
    for line in places.get(format_name, []):
        if sum(_whole_number(word) for word in line.split()) > len(lines):
            raise InputError(
                path,
                found=f"the count {quoted(line.strip())} in a file of {len(lines)} lines",
                expected="a line for each atom",
                todo="copy the whole file again",
            )


def _whole_number(word: str) -> int:
    try:
        return int(word)
    except ValueError:
        return 0


def _read_with_ase(
    path: str | Path, text: str, format_name: str
) -> tuple[list[Any], tuple[str, ...]]:
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        try:
            images = list(ase.io.read(io.StringIO(text), index=slice(None), format=format_name))
        except Exception as error:  # ASE's readers raise whatever their parsing runs into
            reason = f"{type(error).__name__}: {error}"
            raise InputError(
                path,
                found=f"what ASE cannot read as {format_name} ({quoted(reason, 100)})",
                expected="a structure file",
                todo=_OTHER_FORMAT,
            ) from error
    return images, tuple(quoted(str(warning.message), 200) for warning in caught)


def _check_occupancy(path: str | Path, atoms: Any) -> None:
    """ASE keeps the first species of a shared site and lists the rest in atoms.info."""
    for site in (atoms.info.get("occupancy") or {}).values():
        if len(site) != 1 or any(abs(float(share) - 1) > 1e-3 for share in site.values()):
            shares = ", ".join(f"{name} {share}" for name, share in site.items())
            raise InputError(
                path,
                found=f"a site occupied by {quoted(shares)}",
                expected="every site fully occupied by one element",
                todo="give the ordered structure the Hamiltonian was computed for",
            )
