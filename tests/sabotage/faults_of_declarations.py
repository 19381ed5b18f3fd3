"""Faults of what is said about a Hamiltonian: projections, sites, cell, centre, electrons, spin."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
from case_folder import CaseFolder
from clean_cases import CleanCase
from fault import AS_STATED, Fault, flags, in_models, in_real
from faults_of_files import reorder

from topovet.arrays import FloatArray, IntArray
from topovet.intake.records import HamiltonianFile

D_FOR_P = "l=2,mr=1,2,3"
"""As many functions as a p shell, of the opposite parity."""

TWO_KINDS = ("Bi2Se3", "Sb2Se3", "PbTe_a656", "Sb")


def swap_lines(folder: Path, size: float) -> None:
    """Projections in another order than that of the run."""
    case = CaseFolder(folder)
    lines = case.win_block("projections")
    if len(lines) == 1:  # one species: its shells in the wrong order
        species, shells = lines[0].split(":")
        lines = [f"{species}:{shell}" for shell in shells.split(";")]
    case.write_win_block("projections", lines[::-1])


def has_two_kinds(case: CleanCase) -> bool:
    """Reversing the projection lines changes which function is declared where."""
    return case.name in TWO_KINDS or case.name.startswith(("dirac", "bhz", "atomic"))


def flip_parity(folder: Path, size: float) -> None:
    """A fraction of the projection lines, at least one, declared with the wrong parity."""
    case = CaseFolder(folder)
    lines = case.win_block("projections")
    count = max(1, round(size * len(lines)))
    case.write_win_block("projections", [*map(_flipped, lines[:count]), *lines[count:]])


def _flipped(line: str) -> str:
    site, shells = line.rsplit(":", 1)
    wrong = {"p": D_FOR_P, "s": "pz", "pz": "s", "px": "dxz", "py": "dyz"}
    return f"{site}:" + ";".join(wrong[shell] for shell in shells.split(";"))


def turn_shell(folder: Path, size: float) -> None:
    """The p shells in the order x, y, z, as some programs have it."""
    case = CaseFolder(folder)
    turned = [
        line.replace(":p", ":l=1,mr=2,3,1") if line.endswith(":p") else line
        for line in case.win_block("projections")
    ]
    case.write_win_block("projections", turned)


def has_whole_p_shells(case: CleanCase) -> bool:
    return case.real and case.name != "Sb"


def exchange_functions(folder: Path, size: float) -> None:
    """First and last orbital of the Hamiltonian exchanged, spin pairs kept."""
    n = CaseFolder(folder).hamiltonian().n_wann
    order = np.arange(n)
    order[[0, 1, n - 2, n - 1]] = [n - 2, n - 1, 0, 1]
    reorder(folder, order, companions=True)


def lose_line(folder: Path, size: float) -> None:
    """One projection line missing."""
    case = CaseFolder(folder)
    case.write_win_block("projections", case.win_block("projections")[1:])


def has_several_lines(case: CleanCase) -> bool:
    return case.name not in ("Sb", "Bi111_bilayer")


def move_home_cells(folder: Path, size: float) -> None:
    """The first `size` orbitals taken from the cell at a1, their sites still declared at home."""
    case = CaseFolder(folder)
    h = case.hamiltonian()
    moves = np.zeros((h.n_wann, 3), dtype=np.int64)
    moves[: 2 * round(size), 0] = 1
    case.write_hamiltonian(_moved(h, moves))


def _moved(h: HamiltonianFile, moves: IntArray) -> HamiltonianFile:
    """<m' 0|H|n' R> = <m 0|H|n R + L_n - L_m>; weights divided out."""
    weighted = h.h_r / h.degeneracies[:, None, None]
    blocks: dict[tuple[int, ...], FloatArray] = {}
    step = (moves[:, None, :] - moves[None, :, :]).reshape(-1, 3)  # L_m - L_n
    for shift in np.unique(step, axis=0):
        chosen = (step == shift).all(axis=1).reshape(h.n_wann, h.n_wann)
        for r_cell, block in zip(h.r_cells, weighted, strict=True):
            r_new = tuple((r_cell + shift).tolist())
            target = blocks.setdefault(r_new, np.zeros_like(block))
            target[chosen] += block[chosen]
    cells = sorted(blocks)
    return replace(
        h,
        degeneracies=np.ones(len(cells), dtype=np.int64),
        r_cells=np.array(cells, dtype=np.int64),
        h_r=np.array([blocks[r] for r in cells]),
    )


def declare_centre(folder: Path, size: float) -> None:
    """case.toml names a centre that lies `size` lattice vectors along a1 from a true one."""
    case = CaseFolder(folder)
    x, y, z = TRUE_CENTRE.get(case.seedname, (0.0, 0.0, 0.0))
    case.write_settings(inversion_centre=f"[{x + size}, {y}, {z}]")


TRUE_CENTRE = {"kane_mele": (0.0, 0.0, 0.5), "diamond_strong": (0.12, 0.12, 0.12)}


def move_structure(folder: Path, size: float) -> None:
    """Atoms of .win and POSCAR on another origin than Wannier centres and projection sites."""
    CaseFolder(folder).move_atoms(lambda at: at + size * np.array([1.0, 0, 0]), files="both")


def move_one_atom(folder: Path, size: float) -> None:
    """The first atom of the POSCAR moved by `size` angstrom along a1."""
    case = CaseFolder(folder)
    cell = case.win().cell
    assert cell is not None
    step = size / float(np.linalg.norm(cell[0]))

    def move(at: FloatArray) -> FloatArray:
        at = at.copy()
        at[0, 0] += step
        return at

    case.move_atoms(move, files="poscar")


def scale_poscar(folder: Path, size: float) -> None:
    CaseFolder(folder).change_cell(lambda cell: size * cell, files="poscar")


def stretch_win_cell(folder: Path, size: float) -> None:
    """First lattice vector of the .win file longer by a factor."""
    CaseFolder(folder).change_cell(lambda cell: cell * np.array([[size], [1], [1]]), files="win")


def permute_win_cell(folder: Path, size: float) -> None:
    """Lattice vectors of the .win file in another order, fractional coordinates as they were."""
    CaseFolder(folder).change_cell(lambda cell: np.roll(cell, 1, axis=0), files="win")


def double_win_cell(folder: Path, size: float) -> None:
    """The .win file of a cell twice as long along a1: atoms at half the fraction."""
    case = CaseFolder(folder)
    case.change_cell(lambda cell: cell * np.array([[2.0], [1], [1]]), files="win")
    case.move_atoms(lambda at: at * np.array([0.5, 1, 1]), files="win")


def misstate_filling(folder: Path, size: float) -> None:
    case = CaseFolder(folder)
    case.write_settings(filling=int(case.settings()["filling"]) + int(size))


def misstate_filling_alone(folder: Path, size: float) -> None:
    """The wrong filling, and no Fermi energy to betray it."""
    case = CaseFolder(folder)
    case.write_fermi(None)
    misstate_filling(folder, size)


def shift_fermi(folder: Path, size: float) -> None:
    case = CaseFolder(folder)
    case.write_fermi(case.fermi_ev() + size)


def shift_fermi_alone(folder: Path, size: float) -> None:
    """A wrong Fermi energy, and no filling to betray it."""
    case = CaseFolder(folder)
    case.write_fermi(case.fermi_ev() + size)
    case.write_settings(filling=None)


def lose_spinors(folder: Path, size: float) -> None:
    CaseFolder(folder).edit_win(r"^spinors.*\n", "")


def lose_projections(folder: Path, size: float) -> None:
    case = CaseFolder(folder)
    case.edit_win(r"begin projections\n(.*\n)*?end projections\n", "")


WRONG_ORBITALS = flags("orbital-declaration-wrong")

DECLARATION_FAULTS = (
    Fault(
        "orbital-declaration-wrong",
        "projection-lines-swapped",
        (1,),
        "",
        swap_lines,
        WRONG_ORBITALS,
        suits=has_two_kinds,
    ),
    Fault(
        "orbital-declaration-wrong",
        "parity-of-orbitals-wrong",
        (0, 1),
        "fraction of lines, at least one; all of them only turn the sign of P",
        flip_parity,
        WRONG_ORBITALS,
    ),
    Fault(
        "orbital-declaration-wrong",
        "p-shell-turned",
        (1,),
        "",
        turn_shell,
        WRONG_ORBITALS,
        suits=has_whole_p_shells,
    ),
    Fault(
        "orbital-declaration-wrong",
        "functions-exchanged",
        (1,),
        "",
        exchange_functions,
        WRONG_ORBITALS,
    ),
    Fault(
        "orbital-declaration-wrong",
        "projection-line-lost",
        (1,),
        "",
        lose_line,
        WRONG_ORBITALS,
        suits=has_several_lines,
    ),
    Fault(
        "orbital-declaration-wrong",
        "home-cells-moved",
        (1, 3),
        "orbitals",
        move_home_cells,
        flags("orbital-declaration-wrong", "centres-off"),
        suits=in_models,
    ),
    Fault("none", "projections-absent", (1,), "", lose_projections, flags()),
    Fault(
        "inversion-centre-shifted",
        "centre-misdeclared",
        (0.001, 0.05, 0.25, 0.5, 1),
        "lattice vectors; halves of one are centres again",
        declare_centre,
        flags("inversion-centre-shifted"),
    ),
    Fault(
        "inversion-centre-shifted",
        "structure-on-another-origin",
        (0.0005, 0.05, 0.25, 0.5),
        "lattice vectors",
        move_structure,
        flags("inversion-centre-shifted"),
    ),
    Fault(
        "cell-mismatch",
        "poscar-scaled",
        (1.00001, 1.02, 2),
        "factor",
        scale_poscar,
        flags("cell-mismatch"),
    ),
    Fault(
        "cell-mismatch",
        "poscar-atom-moved",
        (0.01, 0.2, 1),
        "angstrom",
        move_one_atom,
        flags("cell-mismatch"),
    ),
    Fault(
        "cell-mismatch",
        "win-cell-stretched",
        (1.00001, 1.02, 1.5),
        "factor",
        stretch_win_cell,
        flags("cell-mismatch"),
    ),
    Fault(
        "cell-mismatch",
        "win-cell-permuted",
        (1,),
        "",
        permute_win_cell,
        flags("cell-mismatch"),
    ),
    Fault(
        "cell-mismatch",
        "win-cell-doubled",
        (1,),
        "",
        double_win_cell,
        flags("cell-mismatch"),
        suits=in_real,
    ),
    Fault(
        "filling-off",
        "filling-misstated",
        (1, -1, 2, -2, 4, -4),
        "electrons",
        misstate_filling,
        flags("filling-off"),
    ),
    Fault(
        "filling-off",
        "filling-misstated-alone",
        (1, -1, 2, -2),
        "electrons",
        misstate_filling_alone,
        flags("filling-off"),
        truth=AS_STATED,
        suits=in_models,
    ),
    Fault(
        "fermi-outside-gap",
        "fermi-shifted",
        (0.005, 0.5, -0.5, 3, -3),
        "eV",
        shift_fermi,
        flags("fermi-outside-gap", "filling-off"),
    ),
    Fault(
        "fermi-outside-gap",
        "fermi-shifted-alone",
        (0.005, 0.5, -0.5, 3, -3),
        "eV",
        shift_fermi_alone,
        flags("fermi-outside-gap", "filling-off"),
        truth=AS_STATED,
    ),
    Fault(
        "spin-order-mismatch",
        "spinors-undeclared",
        (1,),
        "",
        lose_spinors,
        flags("spin-order-mismatch"),
    ),
)
