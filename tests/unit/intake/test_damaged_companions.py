"""Damaged companions of a case: each gets one sentence with file, line, and what to do."""

from __future__ import annotations

import gzip
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from companion_files import Refusal, hermitian_file, mesh_cells, wsvec_text
from topovet.intake.bands import read_bands, read_eig
from topovet.intake.case_toml import read_settings
from topovet.intake.discovery import find_case
from topovet.intake.shifts.centres import read_centres
from topovet.intake.shifts.ws_shifts import rebuild_shifts
from topovet.intake.shifts.wsvec import read_wsvec
from topovet.intake.structure import read_structure

MESH = (2, 2, 1)
HAMILTONIAN = hermitian_file(mesh_cells(MESH).tolist(), 2)
SHIFTS = rebuild_shifts(HAMILTONIAN.r_cells, np.zeros((2, 3)), MESH, np.diag([3.0, 3, 9]))

SOUND = {
    "GX_hr.dat": "never opened here\n",
    "GX_wsvec.dat": wsvec_text(SHIFTS),
    "GX_centres.xyz": "3\n Wannier centres\nX 0.0 0.0 0.0\nX 0.0 0.0 0.1\nBi 0.0 0.0 0.0\n",
    "GX.eig": "1 1 -1.5\n2 1 2.5\n1 2 -1.0\n2 2 2.0\n",
    "GX_band.dat": "0.0 -1.5\n0.1 -1.4\n\n0.0 2.5\n0.1 2.4\n\n",
    "GX_band.kpt": "2\n0.0 0.0 0.0 1.0\n0.5 0.0 0.0 1.0\n",
    "POSCAR": "GX\n1.0\n3 0 0\n0 3 0\n0 0 9\nBi\n1\nDirect\n0 0 0\n",
    "case.toml": "filling = 1\ndimension = 2\n",
}


def read_everything(folder: Path) -> None:
    case = find_case(folder)
    assert case.wsvec is not None
    assert case.centres is not None
    assert case.eig is not None
    assert case.band is not None
    assert case.band_kpt is not None
    assert case.structure is not None
    assert case.settings is not None
    read_settings(case.settings)
    read_structure(case.structure)
    read_centres(case.centres, HAMILTONIAN.n_wann)
    read_wsvec(case.wsvec, HAMILTONIAN, mp_grid=MESH)
    read_eig(case.eig)
    read_bands(case.band, case.band_kpt, n_wann=HAMILTONIAN.n_wann)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    for name, text in SOUND.items():
        (tmp_path / name).write_text(text)
    return tmp_path


def test_the_sound_case_is_read(folder: Path) -> None:
    read_everything(folder)


def replaced(name: str, old: str, new: str) -> Callable[[Path], None]:
    def edit(folder: Path) -> None:
        assert old in SOUND[name]
        (folder / name).write_text(SOUND[name].replace(old, new))

    return edit


def cut(name: str, length: int) -> Callable[[Path], None]:
    def edit(folder: Path) -> None:
        (folder / name).write_text(SOUND[name][:length])

    return edit


def added(name: str) -> Callable[[Path], None]:
    def edit(folder: Path) -> None:
        (folder / name).touch()

    return edit


def gzipped_and_cut(name: str) -> Callable[[Path], None]:
    def edit(folder: Path) -> None:
        packed = gzip.compress(SOUND[name].encode())
        (folder / f"{name}.gz").write_bytes(packed[: len(packed) // 2])
        (folder / name).unlink()

    return edit


DAMAGES = [
    (
        cut("GX_wsvec.dat", 200),
        'GX_wsvec.dat, line 10: found "0", expected three integers; copy the file of the same '
        "Wannier90 run again, or remove it to have the shifts rebuilt from the centres.",
    ),
    (
        replaced("GX_wsvec.dat", "    2    2    0", "    3    2    0"),
        "GX_wsvec.dat, line 7: found the shift 3 2 0, expected a vector of the 2 x 2 x 1 "
        "supercell; copy the file of the same Wannier90 run again, or remove it to have the "
        "shifts rebuilt from the centres.",
    ),
    (
        gzipped_and_cut("GX_wsvec.dat"),
        "GX_wsvec.dat.gz: found gzip data that ends too early, expected a whole gzip file; copy "
        "or compress the file again.",
    ),
    (
        replaced("GX_centres.xyz", "X 0.0 0.0 0.1\n", ""),
        "GX_centres.xyz, line 4: found 2 rows after the comment line, expected 3, as line 1 says; "
        "copy the file again or let Wannier90 write it again (write_xyz = .true.).",
    ),
    (
        replaced("GX_centres.xyz", "0.1", "*******"),
        'GX_centres.xyz, line 4: found "0.0 0.0 *******", expected a label, x, y and z; copy the '
        "file again or let Wannier90 write it again.",
    ),
    (
        replaced("GX.eig", "2 2 2.0\n", ""),
        "GX.eig, line 3: found 3 energies at the end of the file, expected 2 bands at each of 2 "
        "k-points, 4 in all; copy the file of the same calculation again.",
    ),
    (
        replaced("GX.eig", "-1.0", "NaN"),
        'GX.eig, line 3: found "1 2 NaN", expected a band, a k-point and an energy; copy the file '
        "again or let Wannier90 write it again.",
    ),
    (
        replaced("GX_band.dat", "0.1 2.4\n", ""),
        "GX_band.dat, line 4: found 1 energies of band 2, expected 2, one for each k-point of "
        "GX_band.kpt; copy _band.dat and _band.kpt of one Wannier90 run again, or remove both.",
    ),
    (
        replaced("GX_band.kpt", "2\n", "3\n"),
        "GX_band.kpt, line 3: found 2 k-points, expected 3, as line 1 says; copy _band.dat and "
        "_band.kpt of one Wannier90 run again, or remove both.",
    ),
    (
        replaced("POSCAR", "Direct\n0 0 0\n", "Direct\n0 0\n"),
        "POSCAR: found what ASE cannot read as vasp (",
    ),
    (
        replaced("case.toml", "filling", "filing"),
        'case.toml, line 1: found the key "filing", expected one of name, filling, fermi_eV, '
        "dimension, inversion_centre, surface, spinless; write filling if that is meant, or "
        "delete it.",
    ),
    (
        added("GX.eig.gz"),
        'GX.eig: found both "GX.eig" and "GX.eig.gz", expected one of the two, since they may '
        "differ; delete the one that is out of date.",
    ),
]


@pytest.mark.parametrize(("damage", "sentence"), DAMAGES)
def test_damage_gets_one_sentence(
    folder: Path, damage: Callable[[Path], None], sentence: str
) -> None:
    damage(folder)
    message = Refusal(folder).of(read_everything, folder)
    if sentence.endswith("("):  # what follows is ASE's own wording
        assert message.startswith(sentence)
        assert message.endswith("give the structure as POSCAR or CIF, or remove it.")
    else:
        assert message == sentence
