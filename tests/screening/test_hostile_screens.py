"""Screens over what no one should have to meet: full disks, odd names, bombs, loops, crashes."""

from __future__ import annotations

import gzip
import json
import os
import shutil
import subprocess
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from case_writer import write_case
from lattice_models import bhz
from screening_runs import ALONE, QUICK, Program, results

pytestmark = pytest.mark.slow

SPARSE_BYTES = 2 << 30
BOMB_BYTES = 256 << 20


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    """A file system of 1 MB, about three dossiers."""
    place = tmp_path / "disk"
    place.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", "size=1m", "tmpfs", str(place)]
    if os.geteuid() != 0 or subprocess.run(mount, capture_output=True).returncode != 0:
        pytest.skip("a small file system cannot be mounted here (needs root and mount)")
    yield place
    subprocess.run(["umount", str(place)], check=True)


def test_a_full_disk_is_one_sentence_and_the_screen_goes_on_afterwards(
    program: Program, six: Path, undisturbed: dict[str, str], small_disk: Path, tmp_path: Path
) -> None:
    out, root = small_disk / "out", tmp_path / "cases"
    some = sorted(undisturbed)[:4]
    for name in some:
        shutil.copytree(six / name, root / name)
    done = program.run("screen", root, "--out", out, *QUICK)
    assert done.returncode == 1
    assert "No space left on device" in done.stderr
    assert "make room" in done.stderr
    assert sum("topovet:" in line for line in done.stderr.splitlines()) == 1
    before = len(list(out.glob("*/screened.json")))
    assert 0 < before < 4
    for name, text in results(out).items():
        assert text in ("{}", undisturbed[name])
    subprocess.run(["mount", "-o", "remount,size=50m", str(small_disk)], check=True)
    done = program.run("screen", root, "--out", out, *ALONE)
    assert done.returncode == 0, done.stderr
    assert f"{before} unchanged" in done.stdout
    assert results(out) == {name: undisturbed[name] for name in some}


def test_odd_names_and_loops_end_in_harmless_text(program: Program, tmp_path: Path) -> None:
    root = tmp_path / "cases"
    names = ['<script>alert("1")</script>', 'it\'s "quoted"', "new\nline", "\x1b[2Jescape", "=1+1"]
    for i, name in enumerate(names):
        folder = root / name.replace("/", "∕")
        write_case(replace(bhz(m=-1.0), name=f"M{i}"), folder)
    (root / "undecodable\udcff").mkdir()
    shutil.copytree(root / "=1+1", root / "undecodable\udcff", dirs_exist_ok=True)
    (root / "loop").symlink_to(root)
    (root / "a").symlink_to(root / "=1+1")
    done = program.run("screen", root, "--out", tmp_path / "out", *ALONE)
    assert done.returncode == 0, done.stderr
    assert "6 cases: 6 vetted" in done.stdout
    log = (tmp_path / "out" / "screen.log").read_text()
    for text in (done.stdout, done.stderr, log):
        assert "\x1b" not in text
        assert not any(line.startswith("line") for line in text.splitlines())
    folders = [path.name for path in (tmp_path / "out").iterdir() if path.is_dir()]
    assert len(folders) == 6
    assert all(name.replace("-", "").replace("~", "").isalnum() for name in folders)
    assert sorted(p.name for p in tmp_path.iterdir()) == ["cases", "out"]


def test_names_in_a_list_cannot_lead_out_of_the_folder(program: Program, tmp_path: Path) -> None:
    write_case(replace(bhz(m=-1.0), name="M"), tmp_path / "M")
    rows = ["../../escape", "/tmp/absolute", "..", "<b>", '=HYPERLINK("http://x")']
    lines = [f'M,"{name.replace(chr(34), chr(34) * 2)}"' for name in rows]
    (tmp_path / "list.csv").write_text("path,name\n" + "\n".join(lines) + "\n")
    done = program.run("screen", tmp_path / "list.csv", "--out", tmp_path / "deep" / "out", *ALONE)
    assert done.returncode == 0, done.stderr
    assert sorted(p.name for p in tmp_path.iterdir()) == ["M", "deep", "list.csv"]
    assert [p.name for p in (tmp_path / "deep").iterdir()] == ["out"]
    named = [json.loads(p.read_text())["case"]["name"] for p in tmp_path.rglob("verdict.json")]
    assert sorted(named) == sorted(rows)
    for report in tmp_path.rglob("report.html"):
        assert "<b></" not in report.read_text()


def test_bombs_and_holes_are_refused_with_file_and_line(program: Program, tmp_path: Path) -> None:
    root = tmp_path / "cases"
    good = write_case(replace(bhz(m=-1.0), name="good"), root / "good")
    for name in ("bomb", "promise", "hole"):
        shutil.copytree(good, root / name)
        (root / name / "good_hr.dat").unlink()
    with gzip.open(root / "bomb" / "good_hr.dat.gz", "wb", 9) as bomb:
        bomb.write(b"header\n 4\n 1\n 1\n")
        for _ in range(BOMB_BYTES >> 20):
            bomb.write(bytes(1 << 20))
    (root / "promise" / "good_hr.dat").write_text("header\n 99999\n 99999\n" + "1 " * 99999)
    with (root / "hole" / "good_hr.dat").open("wb") as hole:
        hole.write(b"header\n 4\n 1\n 1\n")
        hole.truncate(SPARSE_BYTES)
    done = program.run("screen", root, "--out", tmp_path / "out", *ALONE)
    assert done.returncode == 0, done.stderr
    assert "4 cases: 1 vetted, 0 unchanged, 3 failed" in done.stdout
    for name in ("bomb", "promise", "hole"):
        failure = json.loads((tmp_path / "out" / name / "failure.json").read_text())
        assert failure["error"]["line"] is not None
        assert "good_hr.dat" in failure["error"]["file"]
        assert len(failure["error"]["message"]) < 600


CRASH = """
import os, signal
import topovet.screening.vetting as vetting
def vet_case(case, **options):
    if case.endswith("{name}"):
        os.kill(os.getpid(), signal.{signal})
    return real(case, **options)
real, vetting.vet_case = vetting.vet_case, vet_case
"""


@pytest.mark.parametrize(
    ("signum", "said"),
    [
        ("SIGSEGV", "SIGSEGV"),
        pytest.param("SIGKILL", "when memory runs out", marks=pytest.mark.endurance),
    ],
)
def test_a_case_that_takes_its_worker_down_fails_alone(
    program: Program, twelve: Path, tmp_path: Path, signum: str, said: str
) -> None:
    """The worker of a copy of the program is made to crash on one case."""
    copy = Program(tmp_path / "program")
    shutil.copytree(program.folder, copy.folder)
    worker = copy.folder / "topovet" / "screening" / "worker.py"
    code = worker.read_text()
    crash = CRASH.format(name="M03", signal=signum)
    start = 'if __name__ == "__main__":'
    assert start in code
    worker.write_text(code.replace(start, crash + start))
    root, out = tmp_path / "cases", tmp_path / "out"
    for name in ("batch0/M00", "batch1/M01", "batch1/M03"):
        shutil.copytree(twelve / name, root / name)
    done = copy.run("screen", root, "--out", out, *QUICK)
    assert done.returncode == 0, done.stderr
    assert "3 cases: 2 vetted, 0 unchanged, 1 failed" in done.stdout
    failure = json.loads((out / "batch1__M03" / "failure.json").read_text())
    assert "given up after two attempts" in failure["error"]["message"]
    assert said in failure["error"]["message"]
    assert "GiB" in failure["error"]["message"]
    # with the program mended, the case is vetted and its failure forgotten
    done = program.run("screen", root, "--out", out, *ALONE)
    assert "1 vetted, 2 unchanged" in done.stdout
    assert not (out / "batch1__M03" / "failure.json").exists()
