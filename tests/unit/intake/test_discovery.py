"""Which files make up a case, and when that is not clear."""

from __future__ import annotations

import gzip
import hashlib
import os
from pathlib import Path

import pytest

from companion_files import Refusal
from topovet.intake.discovery import find_case, sha256_of


@pytest.fixture
def refusal(tmp_path: Path) -> Refusal:
    return Refusal(tmp_path)


def put(folder: Path, *names: str) -> None:
    folder.mkdir(exist_ok=True)
    for name in names:
        (folder / name).write_text("text\n")


def test_every_companion_is_found_plain_or_gzipped(tmp_path: Path) -> None:
    put(
        tmp_path,
        "GX_hr.dat.gz",
        "GX_tb.dat",
        "GX.win",
        "GX_wsvec.dat.gz",
        "GX_centres.xyz",
        "GX.eig.gz",
        "GX_band.dat.gz",
        "GX_band.kpt",
        "POSCAR",
        "case.toml",
        "notes.txt",
    )
    case = find_case(tmp_path)
    assert (case.folder, case.seedname) == (str(tmp_path), "GX")
    found = {
        field: Path(getattr(case, field)).name
        for field in ("hr", "tb", "win", "wsvec", "centres", "eig", "band", "band_kpt")
    }
    assert found == {
        "hr": "GX_hr.dat.gz",
        "tb": "GX_tb.dat",
        "win": "GX.win",
        "wsvec": "GX_wsvec.dat.gz",
        "centres": "GX_centres.xyz",
        "eig": "GX.eig.gz",
        "band": "GX_band.dat.gz",
        "band_kpt": "GX_band.kpt",
    }
    assert case.structure == str(tmp_path / "POSCAR")
    assert case.settings == str(tmp_path / "case.toml")


def test_absent_companions_are_none_and_other_seednames_are_not_taken(tmp_path: Path) -> None:
    put(tmp_path, "GX_hr.dat", "GY.win", "GX2_wsvec.dat", "_centres.xyz")
    case = find_case(tmp_path)
    assert case.win is case.wsvec is case.centres is case.structure is case.settings is None


def test_tb_dat_alone_makes_a_case(tmp_path: Path) -> None:
    put(tmp_path, "GX_tb.dat.gz")
    case = find_case(tmp_path)
    assert case.hr is None
    assert case.tb == str(tmp_path / "GX_tb.dat.gz")


def test_a_file_named_directly_is_taken_whatever_else_is_there(tmp_path: Path) -> None:
    put(tmp_path, "GX_hr.dat", "GX_hr.dat.gz", "GY_hr.dat", "GX.win", "GY.win")
    case = find_case(tmp_path / "GX_hr.dat.gz")
    assert (case.hr, case.win) == (str(tmp_path / "GX_hr.dat.gz"), str(tmp_path / "GX.win"))


def test_hidden_files_are_no_cases(tmp_path: Path) -> None:
    put(tmp_path, "GX_hr.dat", "._GX_hr.dat", ".GY_hr.dat", "_hr.dat")
    assert find_case(tmp_path).seedname == "GX"


@pytest.mark.parametrize(
    ("names", "chosen"),
    [
        (("POSCAR", "CONTCAR", "GX.cif"), "POSCAR"),
        (("CONTCAR.gz", "GX.vasp", "a.cif"), "CONTCAR.gz"),
        (("a.vasp", "GX.cif"), "a.vasp"),
        (("a.cif", "GX.cif", "b.cif", "GX.xsf"), "GX.cif"),
        (("a.cif.gz", "GX_centres.xyz"), "a.cif.gz"),
        (("GX_centres.xyz", "GX.xyz"), "GX.xyz"),
    ],
)
def test_the_structure_is_taken_in_the_stated_order(
    tmp_path: Path, names: tuple[str, ...], chosen: str
) -> None:
    put(tmp_path, "GX_hr.dat", *names)
    assert find_case(tmp_path).structure == str(tmp_path / chosen)


def test_links_are_followed_but_circles_are_refused(tmp_path: Path, refusal: Refusal) -> None:
    put(tmp_path / "data", "GX_hr.dat")
    case = tmp_path / "case"
    case.mkdir()
    (case / "GX_hr.dat").symlink_to(tmp_path / "data" / "GX_hr.dat")
    (case / "here").symlink_to(case, target_is_directory=True)
    assert find_case(case).hr == str(case / "GX_hr.dat")
    assert find_case(case / "here" / "here").seedname == "GX"
    (case / "GX.win").symlink_to(case / "GX.win")
    assert refusal.of(find_case, case) == (
        "case/GX.win: found a link that leads nowhere, expected an ordinary file; replace it by "
        "the file itself."
    )


def test_a_pipe_is_not_waited_for(tmp_path: Path, refusal: Refusal) -> None:
    os.mkfifo(tmp_path / "GX_hr.dat")
    sentence = "expected an ordinary file; replace it by the file itself."
    assert refusal.of(find_case, tmp_path) == f"GX_hr.dat: found something else, {sentence}"
    assert refusal.of(find_case, tmp_path / "GX_hr.dat").endswith(sentence)


def test_what_is_missing_or_ambiguous_is_said(tmp_path: Path, refusal: Refusal) -> None:
    assert refusal.of(find_case, tmp_path / "nowhere") == (
        "nowhere: found no such file or folder, expected a case folder or an _hr.dat file; check "
        "the path."
    )
    put(tmp_path, "GX.win")
    assert refusal.of(find_case, tmp_path) == (
        "CASE: found 1 file, none of them a Hamiltonian, expected NAME_hr.dat or NAME_tb.dat (or "
        ".gz); copy it here, or set write_hr = .true. and run Wannier90 again."
    )
    assert refusal.of(find_case, tmp_path / "GX.win") == (
        'GX.win: found a file named "GX.win", expected a case folder, or a file whose name ends '
        "in _hr.dat or _tb.dat (or .gz); give the folder, or rename the file as Wannier90 names "
        "it."
    )
    put(tmp_path, "GX_hr.dat", "GY_tb.dat", "GZ_hr.dat.gz")
    assert refusal.of(find_case, tmp_path) == (
        'CASE: found 3 seednames ("GX", "GY", "GZ"), expected one case in a folder; give the path '
        "of one _hr.dat file, or keep each case in a folder of its own."
    )


def test_two_versions_of_one_file_are_refused(tmp_path: Path, refusal: Refusal) -> None:
    put(tmp_path, "GX_hr.dat", "GX_wsvec.dat", "GX_wsvec.dat.gz")
    assert refusal.of(find_case, tmp_path) == (
        'GX_wsvec.dat: found both "GX_wsvec.dat" and "GX_wsvec.dat.gz", expected one of the two, '
        "since they may differ; delete the one that is out of date."
    )


def test_structures_of_one_kind_without_a_preference_are_refused(
    tmp_path: Path, refusal: Refusal
) -> None:
    put(tmp_path, "GX_hr.dat", "a.cif", "b.cif.gz")
    assert refusal.of(find_case, tmp_path) == (
        'CASE: found 2 structures ("a.cif", "b.cif"), expected one structure of a kind, or one '
        'that bears the seedname; remove the others or rename the right one "GX.cif".'
    )


def test_a_hash_is_that_of_the_file_on_disk(tmp_path: Path, refusal: Refusal) -> None:
    path = tmp_path / "GX_hr.dat.gz"
    data = gzip.compress(os.urandom(3_000_000))
    path.write_bytes(data)
    assert sha256_of(path) == (hashlib.sha256(data).hexdigest(), len(data))
    assert refusal.of(sha256_of, tmp_path / "gone") == (
        "gone: found a file that cannot be read (No such file or directory), expected a readable "
        "file; check its permissions."
    )
