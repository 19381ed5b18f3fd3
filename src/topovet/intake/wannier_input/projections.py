"""The projections block of a `.win` file -> Wannier functions in Wannier90's order.

A line is `site:angular[:z=…][:x=…][:r=…][:zona=…][(spin)][[axis]]`. For each site of the line, in
the order of the atoms, the angular functions run through l from -5 to 3 and mr from 1; with
spinors each of them is an up and a down function next to each other. Grammar and order follow
Wannier90's user guide and its routine `param_get_projections`, both from memory.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.errors import InputError, quoted
from topovet.intake.records import DeclaredOrbital
from topovet.intake.wannier_input.angular import ANGULAR_NAMES, parse_angular
from topovet.intake.wannier_input.local_axes import Vector, axes_of, unit_vector
from topovet.intake.wannier_input.win_grammar import Block, Line, WinText
from topovet.intake.wannier_input.win_structure import WinAtoms, split_unit
from topovet.intake.wannier_input.win_values import (
    read_logical,
    read_ranges,
    split_items,
    to_float,
    to_int,
)

MAX_ORBITALS = 20_000
"""Most Wannier functions a block may declare; a misprint must not fill the memory."""

SAME_SITE_FRAC = 2e-3
"""Largest fractional difference with which a site given by coordinates is an atom's."""

_SPIN = re.compile(r"\(([ud])(?:,([ud]))?\)|\[([^\[\]]*)\]")
_SPIN_OF_LETTER = {"u": 1, "d": -1}
_Z_DEFAULT: Vector = (0.0, 0.0, 1.0)
_X_DEFAULT: Vector = (1.0, 0.0, 0.0)


@dataclass(frozen=True, slots=True, eq=False)
class ProjectionFrame:
    """What the lines of a projections block refer to.

    Attributes
    ----------
    file
        Name used in messages.
    atoms
        The species and their places.
    cell
        (3, 3) angstrom, None where the file has none.
    spinors
        Whether every function carries a spin.
    unit_ang
        Unit of `c=` sites, angstrom.
    """

    file: str
    atoms: WinAtoms
    cell: FloatArray | None
    spinors: bool
    unit_ang: float = 1.0


def read_projections(
    text: WinText,
    atoms: WinAtoms,
    cell: FloatArray | None,
    *,
    spinors: bool,
    num_wann: int | None,
) -> tuple[tuple[DeclaredOrbital, ...], str | None]:
    """Wannier functions as declared, or why nothing usable is declared.

    Parameters
    ----------
    text
        The `.win` file.
    atoms, cell
        Its structure.
    spinors
        Its keyword `spinors`.
    num_wann
        Its keyword `num_wann`; where it is None the number of functions is left unchecked.

    Returns
    -------
    orbitals
        In the order of the Hamiltonian's rows; empty where nothing usable is declared.
    undeclared_reason
        Then the reason in one clause, else None.

    Raises
    ------
    InputError
        A line breaks the grammar, or names a species the file does not have.
    """
    for keyword in ("auto_projections", "use_bloch_phases"):
        line = text.keyword(keyword)
        if line is not None and read_logical(text.file, line, keyword):
            return (), f"the .win file has {keyword} on, which declares no orbitals"
    block = text.block("projections")
    if block is None:
        return (), "the .win file has no projections block"
    random, declared = _read_block(block, ProjectionFrame(text.file, atoms, cell, spinors))
    if random:
        return (), "the projections in the .win file are random"
    if not declared:
        return (), "the projections block of the .win file is empty"
    chosen = _select(text, declared)
    if num_wann is not None and len(chosen) != num_wann:
        return (), _count_mismatch(len(chosen), num_wann, spinors)
    return chosen, None


def _read_block(block: Block, frame: ProjectionFrame) -> tuple[bool, tuple[DeclaredOrbital, ...]]:
    """Whether a line says `random`, and the functions of all other lines."""
    without_random = tuple(line for line in block.lines if line.text.lower() != "random")
    unit, lines = split_unit(Block(block.name, block.number, without_random))
    frame = replace(frame, unit_ang=unit)
    orbitals: list[DeclaredOrbital] = []
    for line in lines:
        orbitals.extend(read_projection_line(line, frame))
        if len(orbitals) > MAX_ORBITALS:
            raise InputError(
                frame.file,
                line=line.number,
                found=f"more than {MAX_ORBITALS} Wannier functions",
                expected="as many as num_wann",
                todo="correct the projections block",
            )
    return len(without_random) < len(block.lines), tuple(orbitals)


def read_projection_line(line: Line, frame: ProjectionFrame) -> list[DeclaredOrbital]:
    """The Wannier functions of one line, in Wannier90's order.

    Raises
    ------
    InputError
        The line breaks the grammar, or names a species the file does not have.
    """
    compact = re.sub(r"\s+", "", line.text).lower()
    body, spins, spin_axis = _split_spin(line, compact, frame)
    site, *fields = body.split(":")
    if not fields:
        raise _malformed(frame.file, line, quoted(line.text), "site:orbitals, e.g. Bi:p")
    try:
        angular = parse_angular(fields[0])
    except ValueError as error:
        raise _malformed(
            frame.file,
            line,
            f"{quoted(str(error))} as an orbital",
            "names such as s, p, dxy, sp3, sp3-1 or numbers such as l=1,mr=2",
        ) from None
    z, x, radial = _optional_fields(line, fields[1:], frame.file)
    orbitals: list[DeclaredOrbital] = []
    for atom, position in _sites(line, site, frame):
        for l, mr in angular:
            z_axis, x_axis = _axes(line, z, x, l, mr, frame.file)
            orbitals.extend(
                DeclaredOrbital(position, atom, l, mr, z_axis, x_axis, radial, spin, spin_axis)
                for spin in spins
            )
    return orbitals


def _split_spin(
    line: Line, text: str, frame: ProjectionFrame
) -> tuple[str, tuple[int, ...], Vector]:
    """Cut `(u,d)` and `[x,y,z]` off the end: rest of the line, spins (+1, -1), spin axis."""
    matches = list(_SPIN.finditer(text))
    if not frame.spinors:
        if matches:
            raise _malformed(
                frame.file,
                line,
                f"the spin {quoted(matches[0][0])}",
                "no spin, since spinors is not true",
                "set spinors = .true. or delete the spin",
            )
        return text, (0,), _Z_DEFAULT
    suffix = "".join(match[0] for match in matches)
    kinds = [match[0][0] for match in matches]
    if not text.endswith(suffix) or len(set(kinds)) < len(kinds):
        raise _malformed(
            frame.file, line, quoted(line.text), "one (u,d) and one [x,y,z], at the end of the line"
        )
    spins: tuple[int, ...] = (1, -1)
    axis = _Z_DEFAULT
    for match in matches:
        if match[1]:
            letters = {match[1], match[2] or match[1]}
            spins = tuple(sorted((_SPIN_OF_LETTER[letter] for letter in letters), reverse=True))
        else:
            axis = _direction(line, match[3], "the spin axis", frame.file)
    return text[: len(text) - len(suffix)], spins, axis


def _sites(line: Line, site: str, frame: ProjectionFrame) -> list[tuple[int | None, Vector]]:
    """(atom or None, fractional position) of every site that the first field stands for."""
    atoms = frame.atoms
    if site.startswith(("f=", "c=")):
        position = np.array(_vector(line, site[2:], "a site", frame.file))
        if site.startswith("c="):
            if frame.cell is None:
                raise _malformed(
                    frame.file, line, "a c= site", "the block unit_cell_cart", "add the block"
                )
            position = frame.unit_ang * position @ np.linalg.inv(frame.cell)
        return [(_atom_at(position, atoms), _as_vector(position))]
    of_species = [atom for atom, label in enumerate(atoms.labels) if label == site]
    if not of_species:
        species = list(dict.fromkeys(label.capitalize() for label in atoms.labels))
        known = ", ".join(species[:8] + ["…"] * (len(species) > 8))
        raise _malformed(
            frame.file,
            line,
            f"the species {quoted(site.capitalize())}",
            f"one of the atoms ({known or 'the file lists none'}), f=x,y,z or c=x,y,z",
        )
    return [(atom, _as_vector(atoms.positions_frac[atom])) for atom in of_species]


def _atom_at(position: FloatArray, atoms: WinAtoms) -> int | None:
    if not atoms.labels:
        return None
    apart = atoms.positions_frac - position
    distance = np.abs(apart - np.round(apart)).max(axis=1)
    nearest = int(distance.argmin())
    return nearest if distance[nearest] <= SAME_SITE_FRAC else None


def _optional_fields(
    line: Line, fields: list[str], file: str
) -> tuple[Vector | None, Vector | None, int]:
    """z axis, x axis (None where not given) and radial number; zona is checked and left out."""
    given: dict[str, str] = {}
    for field in fields:
        name, _, value = field.partition("=")
        if name not in ("z", "x", "r", "zona") or name in given:
            # Wannier90 looks for these four names only and passes over anything else (from
            # memory), so an axis under another name never reached the Hamiltonian
            raise _malformed(
                file, line, f"the field {quoted(field)}", "z=, x=, r= or zona=, each once"
            )
        given[name] = value
    z = _direction(line, given["z"], "the z axis", file) if "z" in given else None
    x = _direction(line, given["x"], "the x axis", file) if "x" in given else None
    radial = to_int(given.get("r", "1"))
    zona = to_float(given.get("zona", "1"))
    if radial not in (1, 2, 3) or zona is None or zona <= 0:
        raise _malformed(file, line, quoted(line.text), "r = 1, 2 or 3 and zona above 0")
    return z, x, radial


def _axes(
    line: Line, z: Vector | None, x: Vector | None, l: int, mr: int, file: str
) -> tuple[Vector, Vector]:
    about_z = l >= 0 and mr == 1
    axes = axes_of(z or _Z_DEFAULT, x or _X_DEFAULT, about_z=about_z)
    if axes is None:
        where = "the default x axis 1,0,0" if x is None else "its x axis"
        raise _malformed(
            file,
            line,
            f"a z axis that is not at right angles to {where}",
            f"orthogonal axes for {ANGULAR_NAMES[l][mr - 1]}",
            "give an orthogonal x=",
        )
    return axes


def _select(text: WinText, declared: tuple[DeclaredOrbital, ...]) -> tuple[DeclaredOrbital, ...]:
    """The declared functions that `select_projections` keeps, in its order."""
    line = text.keyword("select_projections")
    if line is None:
        return declared
    numbers = read_ranges(text.file, line, "select_projections")
    if max(numbers) > len(declared):
        raise InputError(
            text.file,
            line=line.number,
            found=f"{max(numbers)} in select_projections",
            expected=f"numbers up to {len(declared)}, the number of declared projections",
            todo="correct the line or the projections block",
        )
    return tuple(declared[number - 1] for number in numbers)


def _count_mismatch(declared: int, num_wann: int, spinors: bool) -> str:
    clause = f"the projections declare {declared} Wannier functions and num_wann is {num_wann}"
    if declared > num_wann:
        return f"{clause} (the Hamiltonian may keep a subset, and nothing says which)"
    if 2 * declared == num_wann and not spinors:
        return f"{clause} (spinors = .true. may be missing)"
    return clause


def _vector(line: Line, text: str, what: str, file: str) -> Vector:
    values = [to_float(item) for item in split_items(text)]
    numbers = [value for value in values if value is not None]
    if len(values) != 3 or len(numbers) != 3:
        raise _malformed(file, line, f"{quoted(text)} for {what}", "three finite numbers x,y,z")
    return (numbers[0], numbers[1], numbers[2])


def _direction(line: Line, text: str, what: str, file: str) -> Vector:
    direction = unit_vector(_vector(line, text, what, file))
    if direction is None:
        raise _malformed(file, line, f"{quoted(text)} for {what}", "a vector that is not zero")
    return direction


def _as_vector(position: FloatArray) -> Vector:
    x, y, z = (float(value) for value in position)
    return (x, y, z)


def _malformed(
    file: str, line: Line, found: str, expected: str, todo: str = "correct the projection"
) -> InputError:
    return InputError(file, line=line.number, found=found, expected=expected, todo=todo)
