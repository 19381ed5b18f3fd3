"""`topovet shortlist` as a user meets it."""

from __future__ import annotations

import csv
import io
import json
import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest

from invented_shortlists import write_dossier, write_failure
from topovet.cli.main import main


@dataclass(frozen=True)
class Done:
    """What a command left."""

    returncode: int
    stdout: str
    stderr: str


@pytest.fixture
def run(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Callable[..., Done]:
    """`topovet shortlist` in this process, through the entry point of the command line."""

    def run_here(*words: str, cwd: Path) -> Done:
        monkeypatch.chdir(cwd)
        monkeypatch.setattr(sys, "argv", ["topovet", "shortlist", *words])
        with pytest.raises(SystemExit) as left:
            main()
        said = capsys.readouterr()
        return Done(int(left.value.code or 0), said.out, said.err)

    return run_here


@pytest.fixture
def dossiers(tmp_path: Path) -> Path:
    write_dossier(tmp_path / "d" / "strong")
    write_dossier(
        tmp_path / "d" / "deep" / "plain",
        {"class": "trivial", "invariants.z2": [0] * 4, "case.name": "[red]=T[/red]"},
    )
    write_failure(tmp_path / "d" / "flint")
    (tmp_path / "d" / "ash").mkdir()
    (tmp_path / "d" / "ash" / "verdict.json").write_text("{")
    return tmp_path / "d"


def test_a_table_and_four_files(run: Callable[..., Done], dossiers: Path) -> None:
    done = run("d", cwd=dossiers.parent)
    assert done.returncode == 0, done.stderr
    lines = done.stdout.splitlines()
    first = next(i for i, line in enumerate(lines) if "Lantern-7" in line)
    assert "[red]=T[/red]" in lines[first + 1]
    assert "meV" in lines[first - 1]
    assert "1 nontrivial, 1 trivial by the indices computed, 2 could not be vetted" in done.stdout
    assert "flint: flint_hr.dat, line 812" in done.stderr
    assert "ash: verdict.json" in done.stderr
    written = {p.name for p in dossiers.glob("shortlist.*")}
    assert written == {f"shortlist.{end}" for end in ("html", "json", "csv", "sqlite")}


def test_json_and_csv_on_stdout(run: Callable[..., Done], dossiers: Path) -> None:
    done = run("d", "--json", "--no-files", cwd=dossiers.parent)
    assert [row["rank"] for row in json.loads(done.stdout)["rows"]] == [1, 2]
    done = run("d", "--csv", "--no-files", cwd=dossiers.parent)
    rows = list(csv.DictReader(io.StringIO(done.stdout)))
    assert [row["folder"] for row in rows] == ["strong", "deep/plain"]
    assert not list(dossiers.glob("shortlist.*"))


def test_filters_and_a_folder_of_its_own(run: Callable[..., Done], dossiers: Path) -> None:
    done = run("d", "--class", "trivial", "--element", "cd", "--out", "lists", cwd=dossiers.parent)
    assert "1 case of 2 vetted" in done.stdout
    document = json.loads((dossiers.parent / "lists" / "shortlist.json").read_text("utf-8"))
    assert [(r["rank"], r["folder"]) for r in document["rows"]] == [(2, "deep/plain")]
    assert not list(dossiers.glob("shortlist.*"))


def test_merit_is_shown_and_changed(
    run: Callable[..., Done], dossiers: Path, tmp_path: Path
) -> None:
    shown = run("--show-merit", cwd=tmp_path)
    assert shown.returncode == 0
    (tmp_path / "mine.toml").write_text(shown.stdout.replace("gap = 20.0", "gap = 0"))
    done = run("d", "--json", "--no-files", "--merit", "mine.toml", cwd=tmp_path)
    document = json.loads(done.stdout)
    assert document["merit"]["source"] == "mine.toml"
    assert document["merit"]["rules"]["weights"]["gap"] == 0.0


@pytest.mark.parametrize(
    ("words", "code", "says"),
    [
        (["none"], 1, "expected a folder of dossiers"),
        (["d/strong/report.html"], 1, "expected a folder of dossiers"),
        (["d", "--merit", "d/ash/verdict.json"], 1, "not TOML"),
        (["d", "--json", "--csv"], 2, "not both"),
        (["d", "--element", "Xx"], 2, "no chemical symbol"),
        (["d", "--flag", "nonsense"], 2, "topovet explain"),
        (["d", "--no-files", "--parquet"], 2, "--no-files"),
        (["d", "--class", "strong"], 2, "strong-ti"),
        ([], 2, "DIR"),
        (["d", "--out", "d/strong/verdict.json/x"], 1, "cannot be written"),
    ],
)
def test_mistakes_get_one_sentence(
    run: Callable[..., Done], dossiers: Path, words: list[str], code: int, says: str
) -> None:
    done = run(*words, cwd=dossiers.parent)
    assert done.returncode == code
    assert says in done.stderr
