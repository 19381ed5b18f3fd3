"""A case folder that is being tampered with: its files read, changed and written back.

Only what a program or a person could do to the files is done here; nothing of the package's own
reading of a case (shifts, symmetry, basis) enters, so that a fault is never softened by it.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np

from companion_files import wsvec_text
from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.intake.bands import read_eig
from topovet.intake.discovery import find_case
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.hamiltonian.hr_write import write_hr
from topovet.intake.records import HamiltonianFile, WinFile, WsShifts
from topovet.intake.shifts.centres import read_centres
from topovet.intake.shifts.wsvec import read_wsvec
from topovet.intake.wannier_input.win import read_win

SIX_DECIMALS = 6
"""As Wannier90 writes `_hr.dat`."""


class CaseFolder:
    """Reads and rewrites the files of one case; every write replaces a file, gzipped or not."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.seedname = find_case(folder).seedname

    # --- the Hamiltonian

    def hamiltonian(self) -> HamiltonianFile:
        return read_hr(self._existing("_hr.dat"))

    def write_hamiltonian(self, changed: HamiltonianFile, decimals: int = SIX_DECIMALS) -> None:
        self.remove("_hr.dat")
        write_hr(
            self.folder / f"{self.seedname}_hr.dat",
            changed.r_cells,
            changed.h_r,
            degeneracies=changed.degeneracies,
            decimals=decimals,
        )

    def change_blocks(self, change: Callable[[HamiltonianFile], HamiltonianFile]) -> None:
        self.write_hamiltonian(change(self.hamiltonian()))

    # --- small files

    def win(self) -> WinFile:
        return read_win(self._existing(".win"))

    def win_text(self) -> str:
        return self._existing(".win").read_text()

    def write_win(self, text: str) -> None:
        self._existing(".win").write_text(text)

    def edit_win(self, pattern: str, replacement: str) -> None:
        """Replace the one match of a regular expression in the `.win` file."""
        text, count = re.subn(pattern, replacement, self.win_text(), flags=re.M)
        if count != 1:
            raise ValueError(f"{count} matches of {pattern!r} in {self.seedname}.win")
        self.write_win(text)

    def win_block(self, name: str) -> list[str]:
        """Lines between `begin name` and `end name`."""
        match = re.search(rf"begin {name}\n(.*?)end {name}", self.win_text(), flags=re.S)
        return [] if match is None else match[1].splitlines()

    def write_win_block(self, name: str, lines: Sequence[str]) -> None:
        body = "".join(f"{line}\n" for line in lines)
        text = re.sub(
            rf"(begin {name}\n).*?(end {name})",
            lambda match: match[1] + body + match[2],
            self.win_text(),
            flags=re.S,
        )
        self.write_win(text)

    def settings(self) -> dict[str, str]:
        """Keys and raw values of `case.toml`, which is written one key to a line."""
        lines = (self.folder / "case.toml").read_text().splitlines()
        return dict(line.split(" = ", 1) for line in lines if line.strip())

    def write_settings(self, **changes: object) -> None:
        """Set keys of `case.toml`; None removes one."""
        merged: dict[str, object] = {**self.settings(), **changes}
        lines = [f"{key} = {value}" for key, value in merged.items() if value is not None]
        (self.folder / "case.toml").write_text("\n".join(lines) + "\n")

    def fermi_ev(self) -> float:
        fermi = self.win().fermi_energy_ev
        if fermi is None:
            raise ValueError(f"{self.seedname}.win states no Fermi energy")
        return fermi

    def write_fermi(self, fermi_ev: float | None) -> None:
        line = "" if fermi_ev is None else f"fermi_energy = {fermi_ev:.6f}\n"
        text = re.sub(r"^fermi_energy.*\n", "", self.win_text(), flags=re.M)
        self.write_win(line + text)

    # --- structure

    def poscar(self) -> list[str]:
        return (self.folder / "POSCAR").read_text().splitlines()

    def write_poscar(self, lines: Sequence[str]) -> None:
        (self.folder / "POSCAR").write_text("\n".join(lines) + "\n")

    def move_atoms(self, move: Callable[[FloatArray], FloatArray], *, files: str) -> None:
        """Change fractional coordinates, (n, 3) to (n, 3), in "win", "poscar" or "both"."""
        if files in ("win", "both"):
            rows = [line.split() for line in self.win_block("atoms_frac")]
            moved = move(np.array([row[1:4] for row in rows], dtype=float))
            self.write_win_block(
                "atoms_frac",
                [f"{row[0]} {_row(at)}" for row, at in zip(rows, moved, strict=True)],
            )
        if files in ("poscar", "both"):
            lines = self.poscar()
            moved = move(np.array([line.split()[:3] for line in lines[8:]], dtype=float))
            self.write_poscar([*lines[:8], *map(_row, moved)])

    def change_cell(self, change: Callable[[FloatArray], FloatArray], *, files: str) -> None:
        """Change lattice vectors (rows) in "win", "poscar" or "both"; fractions stay."""
        if files in ("win", "both"):
            unit, *rows = self.win_block("unit_cell_cart")
            cell = change(np.array([row.split() for row in rows], dtype=float))
            self.write_win_block("unit_cell_cart", [unit, *map(_row, cell)])
        if files in ("poscar", "both"):
            lines = self.poscar()
            cell = change(np.array([line.split() for line in lines[2:5]], dtype=float))
            self.write_poscar([*lines[:2], *map(_row, cell), *lines[5:]])

    # --- companions of a first-principles run

    def has(self, suffix: str) -> bool:
        return any((self.folder / f"{self.seedname}{suffix}{z}").exists() for z in ("", ".gz"))

    def remove(self, suffix: str) -> None:
        self._existing(suffix).unlink()

    def shifts(self) -> WsShifts:
        return read_wsvec(self._existing("_wsvec.dat"), self.hamiltonian())

    def write_shifts(self, shifts: WsShifts) -> None:
        self.remove("_wsvec.dat")
        (self.folder / f"{self.seedname}_wsvec.dat").write_text(wsvec_text(shifts))

    def centres(self) -> FloatArray:
        n_wann = self.hamiltonian().n_wann
        return np.array(read_centres(self._existing("_centres.xyz"), n_wann).centres_cart)

    def write_centres(self, centres_cart: FloatArray) -> None:
        path = self._existing("_centres.xyz")
        lines = path.read_text().splitlines()
        rows = [f"X {_row(centre)}" for centre in centres_cart]
        path.write_text("\n".join([*lines[:2], *rows, *lines[2 + len(rows) :]]) + "\n")

    def eig(self) -> FloatArray:
        """(n_k, n_bands) eV."""
        return np.array(read_eig(self._existing(".eig")).energies_ev)

    def write_eig(self, energies_ev: FloatArray) -> None:
        self.remove(".eig")
        lines = [
            f"{band + 1:5d}{k + 1:5d}{energy:18.12f}\n"
            for k, row in enumerate(energies_ev)
            for band, energy in enumerate(row)
        ]
        (self.folder / f"{self.seedname}.eig").write_text("".join(lines))

    def _existing(self, suffix: str) -> Path:
        for packed in ("", ".gz"):
            path = self.folder / f"{self.seedname}{suffix}{packed}"
            if path.exists():
                return path
        raise FileNotFoundError(f"{self.seedname}{suffix} in {self.folder}")


def onsite_row(hamiltonian: HamiltonianFile) -> int:
    """Row of R = 0."""
    return int(np.flatnonzero(~hamiltonian.r_cells.any(axis=1))[0])


def keep_rows(hamiltonian: HamiltonianFile, rows: BoolArray | IntArray) -> HamiltonianFile:
    """The same file with some of its R vectors only (boolean mask or indices)."""
    return replace(
        hamiltonian,
        degeneracies=hamiltonian.degeneracies[rows],
        r_cells=hamiltonian.r_cells[rows],
        h_r=hamiltonian.h_r[rows],
    )


def _row(values: FloatArray) -> str:
    return " ".join(f"{value:16.10f}" for value in values)
