"""`topovet screen` as a user meets it."""

from __future__ import annotations

import json
import os
import shutil
import signal
import time
from pathlib import Path

import pytest

from screening_runs import ALONE, QUICK, Program, results, write_small_cases

pytestmark = pytest.mark.slow


@pytest.fixture
def three(tmp_path: Path) -> Path:
    """Three cases, one of them damaged."""
    root = tmp_path / "cases"
    write_small_cases(root, 2)
    (root / "broken").mkdir()
    (root / "broken" / "B_hr.dat").write_text("header\n 2\n 1\n 1\n 0 0 0 1 1 0.5 0.0\n")
    return root


def _log(out: Path) -> list[str]:
    return (out / "screen.log").read_text().splitlines()


def test_a_screen_leaves_dossiers_a_failure_a_log_and_a_summary(
    program: Program, three: Path, tmp_path: Path
) -> None:
    done = program.run("screen", "cases", "--out", "out", *QUICK, cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    out = tmp_path / "out"
    folders = {path.name: path for path in out.iterdir() if path.is_dir()}
    assert sorted(folders) == ["batch0__M00", "batch1__M01", "broken"]
    for name in ("batch0__M00", "batch1__M01"):
        assert {p.name for p in folders[name].iterdir()} == {
            *("verdict.json", "report.html", "figures", "tasks", "log.txt", "screened.json")
        }
    failure = json.loads((folders["broken"] / "failure.json").read_text())
    assert failure["case"] == {"name": "broken", "path": str(three / "broken")}
    assert failure["error"]["file"].endswith("B_hr.dat")
    assert failure["error"]["line"] == 5
    assert not (folders["broken"] / "verdict.json").exists()
    assert "3 cases: 2 vetted, 0 unchanged, 1 failed" in done.stdout
    assert "broken: " in done.stdout
    assert "[3/3]" in done.stderr
    assert "\x1b" not in done.stderr + done.stdout
    assert sum("[" in line for line in _log(out)) == 3


def test_what_is_unchanged_is_left_alone_and_what_changed_is_made_again(
    program: Program, three: Path, tmp_path: Path
) -> None:
    out = tmp_path / "out"
    words = ("screen", three, "--out", out, *ALONE)
    program.run(*words)
    first, second = (out / name / "verdict.json" for name in ("batch0__M00", "batch1__M01"))
    before = first.stat().st_mtime_ns, second.stat().st_mtime_ns
    shutil.copytree(three / "batch0" / "M00", three / "broken", dirs_exist_ok=True)
    (three / "broken" / "B_hr.dat").unlink()
    toml = three / "batch1" / "M01" / "case.toml"
    toml.write_text(toml.read_text().replace("filling = 2", "filling = 4"))
    done = program.run(*words)
    assert "2 vetted, 1 unchanged, 0 failed" in done.stdout
    assert first.stat().st_mtime_ns == before[0]
    assert json.loads(second.read_text())["electrons"]["filling"] == 4
    assert not (out / "broken" / "failure.json").exists()
    again = program.run(*words)
    assert "0 vetted, 3 unchanged, 0 failed" in again.stdout
    assert "all of them up to date" in _log(out)[-5]
    fresh = program.run(*words, "--fresh")
    assert "3 vetted, 0 unchanged, 0 failed" in fresh.stdout
    assert first.stat().st_mtime_ns != before[0]


@pytest.mark.endurance  # as for a single case in the tests of `vet`
def test_a_case_that_is_damaged_later_loses_its_verdict(
    program: Program, three: Path, tmp_path: Path
) -> None:
    out = tmp_path / "out"
    program.run("screen", three, "--out", out, *ALONE)
    hr = three / "batch0" / "M00" / "M00_hr.dat"
    hr.write_text(hr.read_text()[:-30])
    done = program.run("screen", three, "--out", out, *ALONE)
    assert done.returncode == 0
    assert "1 unchanged, 2 failed" in done.stdout
    names = {p.name for p in (out / "batch0__M00").iterdir()}
    assert "failure.json" in names
    assert not {"verdict.json", "report.html", "screened.json"} & names


def test_a_list_goes_before_case_toml_and_is_named_as_source(
    program: Program, three: Path, tmp_path: Path
) -> None:
    (three / "list.csv").write_text(
        "path,name,filling,dimension,remark\n"
        "batch0/M00,half filled,2,2,=1+1\n"
        "batch0/M00,four,4,,\n"
        "nowhere,lost,,,\n"
    )
    out = tmp_path / "out"
    done = program.run("screen", three / "list.csv", "--out", out, *ALONE)
    assert done.returncode == 0, done.stderr
    assert 'not used: "remark"' in done.stdout
    documents = {p.parent.name: json.loads(p.read_text()) for p in out.glob("*/verdict.json")}
    four = documents["four"]
    assert (four["electrons"]["filling"], four["electrons"]["source"]) == (4, "list.csv")
    assert four["case"]["name"] == "four"
    half = next(d for name, d in documents.items() if name != "four")
    assert (half["case"]["name"], half["electrons"]["filling"]) == ("half filled", 2)
    assert "no such file or folder" in (out / "lost" / "failure.json").read_text()


@pytest.mark.parametrize(
    ("words", "code", "message"),
    [
        (("empty",), 1, "no Hamiltonian at any depth"),
        (("nowhere",), 1, "no such folder"),
        (("bad.csv",), 1, "bad.csv, line 2: found filling"),
        (("empty", "--workers", "0"), 2, "0 is not in the range"),
        (("empty", "--shard", "3/2"), 2, "I counts from 1 to N"),
        (("empty", "--workers", "1", "--dask", "x"), 2, "not both"),
    ],
)
def test_mistakes_are_one_sentence(
    program: Program, tmp_path: Path, words: tuple[str, ...], code: int, message: str
) -> None:
    (tmp_path / "empty").mkdir()
    (tmp_path / "bad.csv").write_text("path,filling\nx,many\n")
    done = program.run("screen", *words, "--out", "out", cwd=tmp_path)
    assert done.returncode == code
    assert message in done.stderr
    assert not (tmp_path / "out").exists()


def test_only_failures_is_exit_code_1(program: Program, three: Path, tmp_path: Path) -> None:
    done = program.run("screen", three / "broken", "--out", tmp_path / "out", *ALONE)
    assert done.returncode == 1
    assert "none of the cases could be vetted" in done.stderr


def test_shards_together_make_the_whole(
    program: Program, six: Path, undisturbed: dict[str, str], tmp_path: Path
) -> None:
    out = tmp_path / "out"
    for i in (1, 2):
        done = program.run("screen", six, "--out", out, "--shard", f"{i}/2", *ALONE)
        assert "3 cases: 3 vetted" in done.stdout
        assert (out / f"screen-{i}of2.log").exists()
    assert results(out) == undisturbed
    empty = program.run("screen", six, "--out", out, "--shard", "7/7", *ALONE)
    assert empty.returncode == 0
    assert "0 cases" in empty.stdout


@pytest.mark.endurance  # kills and shards compare the same
def test_one_worker_gives_what_two_give(
    program: Program, six: Path, undisturbed: dict[str, str], tmp_path: Path
) -> None:
    done = program.run("screen", six, "--out", tmp_path / "out", "--workers", "1", *QUICK)
    assert done.returncode == 0
    assert results(tmp_path / "out") == undisturbed


@pytest.mark.parametrize(
    "signum", [pytest.param(signal.SIGINT, marks=pytest.mark.endurance), signal.SIGTERM]
)
def test_a_stopped_screen_says_how_to_go_on_and_leaves_no_worker(
    program: Program, six: Path, undisturbed: dict[str, str], tmp_path: Path, signum: int
) -> None:
    out = tmp_path / "out"
    process = program.start("screen", six, "--out", out, *QUICK)
    deadline = time.monotonic() + 60
    while not list(out.glob("*/screened.json")) and time.monotonic() < deadline:
        time.sleep(0.02)
    process.send_signal(signum)
    assert process.wait(30) == 128 + signum
    with pytest.raises(ProcessLookupError):
        os.killpg(process.pid, 0)
    assert "run it again to go on" in _log(out)[-1]
    n_done = len(list(out.glob("*/screened.json")))
    assert 0 < n_done < 6
    done = program.run("screen", six, "--out", out, *QUICK)
    assert f"{6 - n_done} vetted, {n_done} unchanged" in done.stdout
    assert results(out) == undisturbed
    assert not list(out.rglob(".*"))
