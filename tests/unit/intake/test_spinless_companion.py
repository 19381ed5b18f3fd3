"""Finding the run without spin-orbit coupling that a case names; the sentence where it fails."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path

import pytest

from companion_files import Refusal
from topovet.intake.companion import find_companion
from topovet.intake.discovery import find_case
from topovet.intake.records import CaseFiles

EXPECTED = "the case folder, or the _hr.dat, of the same compound without spin-orbit coupling"
TODO = "correct the path, which is taken from the case folder, or delete the line"


@pytest.fixture
def case(tmp_path: Path) -> Path:
    """A case and a companion side by side; no content is looked at."""
    for name in ("case", "without"):
        (tmp_path / name).mkdir()
        (tmp_path / name / "X_hr.dat").write_text("")
        (tmp_path / name / "case.toml").write_text("")
    return tmp_path / "case"


def companion_of(case: Path, written: str, stated: Path | None = None) -> CaseFiles | None:
    (case / "case.toml").write_text(f"filling = 2\nspinless = '{written}'\n")
    return find_companion(find_case(case), stated)


@pytest.mark.parametrize("written", ["../without", "../without/X_hr.dat", "{absolute}"])
def test_folder_file_or_absolute_path(case: Path, written: str) -> None:
    there = case.parent / "without"
    found = companion_of(case, written.format(absolute=there))
    assert found is not None
    assert found.hr is not None
    assert os.path.samefile(found.hr, there / "X_hr.dat")


def test_what_is_stated_prevails_and_chains_are_not_followed(case: Path) -> None:
    other = case.parent / "other"
    other.mkdir()
    (other / "Y_hr.dat").write_text("")
    (other / "case.toml").write_text('spinless = "nowhere"\n')
    found = companion_of(case, "also-nowhere", other)
    assert found is not None
    assert (found.seedname, found.spinless) == ("Y", None)


def test_case_toml_speaks_for_the_case_alone_in_a_shared_folder(case: Path) -> None:
    (case / "X_spinless_hr.dat").write_text("")
    (case / "case.toml").write_text("spinless = 'X_spinless_hr.dat'\n")
    found = find_companion(find_case(case / "X_hr.dat"))
    assert found is not None
    assert (found.seedname, found.settings) == ("X_spinless", None)


def loop(folder: Path) -> None:
    (folder / "a").symlink_to("b")
    (folder / "b").symlink_to("a")


@pytest.mark.parametrize(
    ("written", "prepare", "sentence"),
    [
        (
            "nowhere",
            lambda folder: None,
            'case.toml, line 2: found spinless = "nowhere", where there is nothing, expected '
            f"{EXPECTED}; {TODO}.",
        ),
        (
            "a",
            loop,
            'case.toml, line 2: found spinless = "a", where there is a link that leads nowhere, '
            f"expected {EXPECTED}; {TODO}.",
        ),
        (
            "x" * 900,
            lambda folder: None,
            f'case.toml, line 2: found spinless = "{"x" * 199}…", where there is nothing, '
            f"expected {EXPECTED}; {TODO}.",
        ),
        (
            "empty",
            lambda folder: (folder / "empty").mkdir(),
            "empty: found 0 files, none of them a Hamiltonian, expected NAME_hr.dat or NAME_tb.dat "
            "(or .gz); copy it here, or set write_hr = .true. and run Wannier90 again.",
        ),
        (
            "/dev/zero",
            lambda folder: None,
            '/dev/zero: found a file named "zero", expected a case folder, or a file whose name '
            "ends in _hr.dat or _tb.dat (or .gz); give the folder, or rename the file as Wannier90 "
            "names it.",
        ),
    ],
    ids=["missing", "loop", "long", "empty", "device"],
)
def test_what_is_no_companion_gets_one_sentence(
    case: Path, written: str, prepare: Callable[[Path], None], sentence: str
) -> None:
    prepare(case)
    assert Refusal(case).of(companion_of, case, written) == sentence
