"""Structures through ASE: what comes out, and what is refused."""

from __future__ import annotations

import gzip
import io
from pathlib import Path

import ase
import ase.io
import numpy as np
import pytest

from companion_files import Refusal
from topovet.intake.structure import read_structure

CELL = np.array([[3.0, 0.1, 0.0], [0.0, 4.0, 0.2], [0.3, 0.0, 5.0]])
POSITIONS = np.array([[0.1, 0.2, 0.3], [1.1, -0.2, 0.5]])
CIF = """\
data_GX
_cell_length_a 4.0
_cell_length_b 4.0
_cell_length_c 5.0
_cell_angle_alpha 90
_cell_angle_beta 90
_cell_angle_gamma 90
_space_group_name_H-M_alt 'P 1'
loop_
_atom_site_label
_atom_site_type_symbol
_atom_site_fract_x
_atom_site_fract_y
_atom_site_fract_z
_atom_site_occupancy
Bi1 Bi 0.0 0.0 0.0 1.0
Te1 Te 0.5 0.5 0.25 1.0
"""


def written(path: Path, format_name: str) -> Path:
    atoms = ase.Atoms("BiTe", cell=CELL, scaled_positions=POSITIONS, pbc=True)
    text: io.StringIO | io.BytesIO = io.StringIO()
    if format_name == "cif":
        text = io.BytesIO()
    ase.io.write(text, atoms, format=format_name)
    data = text.getvalue()
    path.write_bytes(data if isinstance(data, bytes) else data.encode())
    return path


@pytest.mark.parametrize(
    ("name", "format_name"),
    [
        ("POSCAR", "vasp"),
        ("CONTCAR", "vasp"),
        ("GX.vasp", "vasp"),
        ("GX.xsf", "xsf"),
        ("GX.xyz", "extxyz"),
    ],
)
def test_cell_and_positions_as_written(tmp_path: Path, name: str, format_name: str) -> None:
    path = written(tmp_path / name, format_name)
    found = read_structure(path)
    np.testing.assert_allclose(found.cell, CELL, atol=1e-8)
    np.testing.assert_allclose(found.positions_frac, POSITIONS, atol=1e-7)  # not wrapped
    assert found.symbols == ("Bi", "Te")
    packed = tmp_path / f"{name}.gz"
    packed.write_bytes(gzip.compress(path.read_bytes()))
    np.testing.assert_array_equal(read_structure(packed).positions_frac, found.positions_frac)


def test_cif(tmp_path: Path) -> None:
    path = tmp_path / "GX.cif"
    path.write_text(CIF)
    found = read_structure(path)
    np.testing.assert_allclose(found.cell, np.diag([4.0, 4, 5]), atol=1e-12)
    np.testing.assert_allclose(found.positions_frac[1], [0.5, 0.5, 0.25])


def test_warnings_are_kept_as_notes(tmp_path: Path) -> None:
    path = tmp_path / "GX.cif"
    path.write_text(CIF.replace("_a 4.0", "_a 4.0(1"))
    found = read_structure(path)
    assert found.notes == ('"Badly formed number: "4.0(1""',)


@pytest.mark.parametrize(
    "rows",
    ["Te1 Te 0.5 0.5 0.25 0.6", "Te1 Te 0.5 0.5 0.25 0.5\nSe1 Se 0.5 0.5 0.25 0.5"],
    ids=["vacancies", "alloy"],
)
def test_partly_occupied_sites_are_refused(tmp_path: Path, rows: str) -> None:
    path = tmp_path / "GX.cif"
    path.write_text(CIF.replace("Te1 Te 0.5 0.5 0.25 1.0", rows))
    message = Refusal(tmp_path).of(read_structure, path)
    assert message.startswith('GX.cif: found a site occupied by "Te 0.')
    assert message.endswith(
        "expected every site fully occupied by one element; give the ordered structure the "
        "Hamiltonian was computed for."
    )


@pytest.mark.parametrize(
    ("name", "text", "found"),
    [
        ("POSCAR", "GX\n1.0\n1 0 0\n", "what ASE cannot read as vasp ("),
        ("POSCAR", "\x00\x01\x02", "what ASE cannot read as vasp ("),
        ("GX.cif", CIF.replace("4.0", "four"), "what ASE cannot read as cif ("),
        ("GX.xyz", "1\n\nBi 0 0 0\n", "no cell of three independent vectors"),
        ("GX.xyz", "1\nLattice=\"3 0 0 0 3 0 0 0 0\"\nBi 0 0 0\n", "no cell of three"),
        ("GX.xyz", "1\nLattice=\"3 0 0 0 3 0 0 0 3\"\nBi 0 0 nan\n", "endless coordinates"),
        ("GX.cif", CIF + CIF.replace("data_GX", "data_GY"), "2 structures"),
        ("POSCAR", "GX\n1\n3 0 0\n0 3 0\n0 0 3\nBi\n9999999999\nDirect\n", 'the count "9999'),
        ("POSCAR", "Bi\n1\n3 0 0\n0 3 0\n0 0 3\n9999999999\nDirect\n", 'the count "9999'),
        ("GX.xyz", "1\n\nBi 0 0 0\n9999999999\n\nBi 0 0 0\n", 'the count "9999'),
        ("GX.traj", "anything", 'a file named "GX.traj"'),
    ],
)  # fmt: skip
def test_what_is_no_structure(tmp_path: Path, name: str, text: str, found: str) -> None:
    (tmp_path / name).write_text(text)
    message = Refusal(tmp_path).of(read_structure, tmp_path / name)
    assert message.startswith(f"{name}: found {found}")
    assert "\n" not in message
