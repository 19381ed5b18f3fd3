"""`topovet demo`: writes, screens, ranks, says where; opens nothing, overwrites nothing."""

from __future__ import annotations

import json
import subprocess
import sys
from importlib import resources
from pathlib import Path

import jsonschema
import pytest
from click.testing import CliRunner

from topovet.cli.demo import command
from topovet.demo import campaign

A_FEW = ("GX-10", "GX-13", "GX-19", "GX-23", "GX-29")
"""Two-dimensional ones, quick to vet, and one that cannot be read."""


@pytest.fixture(scope="module")
def small_demo(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, str]:
    """A demo of a few compounds, and what it printed."""
    folder = tmp_path_factory.mktemp("demo") / "campaign"
    few = tuple(c for c in campaign.COMPOUNDS if c.code in A_FEW)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(campaign, "COMPOUNDS", few)
        done = CliRunner().invoke(command, [str(folder), "--workers", "2"])
    assert done.exit_code == 0, done.output
    return folder, done.stdout


def test_everything_is_where_it_is_said_to_be(small_demo: tuple[Path, str]) -> None:
    folder, printed = small_demo
    assert f"shortlist: {folder / 'dossiers' / 'shortlist.html'}" in printed
    assert f"right answers: {folder / 'answers.csv'}" in printed
    assert "5 cases: 4 vetted, 0 unchanged, 1 failed" in printed
    assert sorted(p.name for p in folder.iterdir()) == [
        *("README.txt", "answers.csv", "cases", "dossiers")
    ]
    for code in A_FEW[:4]:
        assert (folder / "dossiers" / code / "report.html").is_file()
    assert (folder / "dossiers" / "shortlist.html").is_file()
    assert (folder / "dossiers" / "GX-29" / "failure.json").is_file()


def test_names_say_that_they_are_invented(small_demo: tuple[Path, str]) -> None:
    folder, _ = small_demo
    for code in A_FEW[:4]:
        verdict = json.loads((folder / "dossiers" / code / "verdict.json").read_text())
        assert verdict["case"]["name"] == f"{code} (invented)"
        assert f"{code} (invented)" in (folder / "dossiers" / "shortlist.html").read_text()


def test_shortlist_fits_its_schema(small_demo: tuple[Path, str]) -> None:
    folder, _ = small_demo
    text = resources.files("topovet").joinpath("report/shortlist.schema.json").read_text()
    shortlist = json.loads((folder / "dossiers" / "shortlist.json").read_text())
    jsonschema.Draft202012Validator(json.loads(text)).validate(shortlist)


def test_folder_with_files_is_refused_in_one_sentence(tmp_path: Path) -> None:
    (tmp_path / "notes.txt").write_text("mine")
    done = subprocess.run(
        [sys.executable, "-m", "topovet", "demo", str(tmp_path)], capture_output=True, text=True
    )
    assert done.returncode == 1
    assert done.stdout == ""
    assert "found a folder that is not empty" in done.stderr
    assert "Traceback" not in done.stderr
    assert [p.name for p in tmp_path.iterdir()] == ["notes.txt"]
