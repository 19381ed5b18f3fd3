"""Which folders below a root are cases."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from topovet.errors import InputError
from topovet.intake.case_tree import find_case_folders


def _case(folder: Path, name: str = "X_hr.dat") -> Path:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / name).write_text("")
    return folder


def _below(root: Path, **options: Path) -> list[str]:
    return [f.relative_to(root).as_posix() for f in find_case_folders(root, **options).folders]


def test_cases_at_any_depth_and_of_any_kind(tmp_path: Path) -> None:
    _case(tmp_path / "b" / "deep" / "er")
    _case(tmp_path / "a", "A_tb.dat.gz")
    _case(tmp_path / "c", "notes.txt")
    _case(tmp_path)
    assert _below(tmp_path) == [".", "a", "b/deep/er"]


def test_hidden_folders_and_files_are_passed_by(tmp_path: Path) -> None:
    _case(tmp_path / ".trash" / "x")
    _case(tmp_path / "a", "._X_hr.dat")
    assert _below(tmp_path) == []


@pytest.mark.parametrize("mark", ["verdict.json", "failure.json", "screen.log"])
def test_there_are_no_cases_below_dossiers(tmp_path: Path, mark: str) -> None:
    _case(tmp_path / "d" / "symmetrised" / "case")
    (tmp_path / "d" / mark).write_text("")
    assert _below(tmp_path) == []


def test_a_case_that_holds_its_own_dossier_is_a_case(tmp_path: Path) -> None:
    _case(tmp_path / "a")
    (tmp_path / "a" / "verdict.json").write_text("")
    assert _below(tmp_path) == ["a"]


def test_the_folder_for_dossiers_is_not_searched(tmp_path: Path) -> None:
    _case(tmp_path / "a")
    _case(tmp_path / "out" / "b")
    assert _below(tmp_path, passed_by=tmp_path / "out") == ["a"]
    assert _below(tmp_path, passed_by=tmp_path / "absent") == ["a", "out/b"]


def test_loops_of_links_end_and_a_case_is_found_once(tmp_path: Path) -> None:
    _case(tmp_path / "z" / "case")
    (tmp_path / "z" / "up").symlink_to(tmp_path)
    (tmp_path / "z" / "self").symlink_to("self")
    (tmp_path / "a-link").symlink_to(tmp_path / "z")
    (tmp_path / "dead").symlink_to("nowhere")
    assert _below(tmp_path) == ["z/case"]


def test_links_lead_out_of_the_root(tmp_path: Path) -> None:
    _case(tmp_path / "elsewhere" / "case")
    (tmp_path / "root").mkdir()
    (tmp_path / "root" / "b").symlink_to(tmp_path / "elsewhere")
    (tmp_path / "root" / "c").symlink_to(tmp_path / "elsewhere")
    assert _below(tmp_path / "root") == ["b/case"]


def test_what_cannot_be_listed_is_named(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    _case(tmp_path / "a")
    (tmp_path / "locked").mkdir()
    real = os.scandir

    def scandir(path: Path) -> object:
        if Path(path).name == "locked":
            raise PermissionError(13, "Permission denied")
        return real(path)

    monkeypatch.setattr(os, "scandir", scandir)
    tree = find_case_folders(tmp_path)
    assert tree.folders == (tmp_path / "a",)
    assert tree.unreadable == ((tmp_path / "locked", "Permission denied"),)


@pytest.mark.parametrize("name", ["absent", "file"])
def test_a_root_that_is_none_is_an_error(tmp_path: Path, name: str) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(InputError, match="expected a folder with cases below it"):
        find_case_folders(tmp_path / name)
