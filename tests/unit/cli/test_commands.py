"""The command line as a user meets it: output, exit codes, messages; never a traceback."""

from __future__ import annotations

import json
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import pytest

from case_writer import write_case
from command_line import Outcome, run_here
from lattice_models import wilson_dirac
from topovet.verdict.advice import CODES

STRONG = replace(wilson_dirac(m=-2.0), name="QV-7")


def _run(*words: str, cwd: Path) -> Outcome:
    """Run the program; a vet that says nothing of its effort is a quick one, to save time."""
    quick = ("--effort", "quick") if words[0] == "vet" and "--effort" not in words else ()
    return run_here(*words, *quick, cwd=cwd)


@pytest.fixture(scope="module")
def case(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_case(STRONG, tmp_path_factory.mktemp("cases") / STRONG.name)


def test_vet_writes_a_dossier(case: Path, tmp_path: Path) -> None:
    done = _run("vet", str(case), "--out", "dossier", "--effort", "standard", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    assert "strong-ti" in done.stdout
    assert "report: dossier/report.html" in done.stdout
    verdict = json.loads((tmp_path / "dossier" / "verdict.json").read_text())
    assert verdict["schema"] == "topovet.verdict/1"
    assert verdict["invariants"]["z2"][0] == 1
    names = {p.name for p in (tmp_path / "dossier").iterdir()}
    assert names == {"verdict.json", "report.html", "figures", "tasks", "log.txt"}


def test_the_program_as_a_process_does_the_same(case: Path, tmp_path: Path) -> None:
    for words in (("inspect", str(case)), ("vet", "nowhere"), ("vet", str(case), "--filling", "0")):
        done = subprocess.run(
            [sys.executable, "-m", "topovet", *words], cwd=tmp_path, capture_output=True, text=True
        )
        here = run_here(*words, cwd=tmp_path)
        assert (done.returncode, done.stdout) == (here.returncode, here.stdout)
        if done.returncode:
            assert done.stderr == here.stderr


def test_json_on_stdout_is_the_verdict_and_nothing_else(case: Path, tmp_path: Path) -> None:
    done = _run("vet", str(case), "--out", "d", "--json", cwd=tmp_path)
    assert json.loads(done.stdout) == json.loads((tmp_path / "d" / "verdict.json").read_text())
    assert done.stdout == (tmp_path / "d" / "verdict.json").read_text()


def test_default_dossier_stands_here_and_is_named_after_the_case(
    case: Path, tmp_path: Path
) -> None:
    assert _run("vet", str(case), cwd=tmp_path).returncode == 0
    assert [p.name for p in tmp_path.iterdir()] == ["QV-7-dossier"]


def test_progress_goes_to_stderr_in_plain_lines(case: Path, tmp_path: Path) -> None:
    done = _run("vet", str(case), "--out", "d", cwd=tmp_path)
    assert "QV-7: parity: done" in done.stderr
    assert "\x1b" not in done.stderr
    assert "parity: done" not in done.stdout


def test_strict_turns_error_flags_into_exit_code_3(case: Path, tmp_path: Path) -> None:
    odd = ("--filling", "1", "--out", "d")
    assert _run("vet", str(case), *odd, cwd=tmp_path).returncode == 0
    assert _run("vet", str(case), *odd, "--strict", cwd=tmp_path).returncode == 3
    assert _run("vet", str(case), "--out", "e", "--strict", cwd=tmp_path).returncode == 0


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (("--filling", "2", "--fermi", "0"), "give --filling or --fermi, not both"),
        (("--surface", "0,0"), "is not three integers such as 0,0,1"),
        (("--surface", "0,0,0"), "Miller indices cannot all be 0"),
        (("--lower-gaps", "2,x"), "is neither all nor numbers such as 10,14"),
        (("--lower-gaps", "0"), "numbers of bands begin with 1"),
        (("--filling", "0"), "0 is not in the range"),
        (("--effort", "heroic"), "is not one of"),
    ],
)
def test_wrong_usage_is_exit_code_2(
    case: Path, tmp_path: Path, words: tuple[str, ...], message: str
) -> None:
    done = _run("vet", str(case), *words, cwd=tmp_path)
    assert done.returncode == 2
    assert message in done.stderr
    assert not list(tmp_path.iterdir())


def test_case_that_cannot_be_vetted_is_exit_code_1_in_one_line(tmp_path: Path) -> None:
    done = _run("vet", "nowhere", cwd=tmp_path)
    assert done.returncode == 1
    assert done.stderr.startswith("topovet: nowhere: found ")
    assert len(done.stderr.splitlines()) == 1
    assert not list(tmp_path.iterdir())


def test_missing_electron_count_is_an_error_not_a_guess(case: Path, tmp_path: Path) -> None:
    silent = tmp_path / "QV-7"
    silent.mkdir()
    for path in case.iterdir():
        if path.name != "case.toml":
            (silent / path.name).write_bytes(path.read_bytes())
    done = _run("vet", str(silent), "--out", "d", cwd=tmp_path)
    assert done.returncode == 1
    assert "the electron count is not stated" in done.stderr
    assert not (tmp_path / "d" / "verdict.json").exists()
    assert _run("vet", str(silent), "--out", "d", "--filling", "2", cwd=tmp_path).returncode == 0


def test_old_verdict_does_not_outlive_its_case(case: Path, tmp_path: Path) -> None:
    """A case that changed and cannot be vetted any more leaves no verdict behind."""
    copy = tmp_path / "QV-7"
    copy.mkdir()
    for path in case.iterdir():
        (copy / path.name).write_bytes(path.read_bytes())
    assert _run("vet", str(copy), "--out", "d", cwd=tmp_path).returncode == 0
    hr = copy / "QV-7_hr.dat"
    hr.write_text(hr.read_text()[:-40])
    assert _run("vet", str(copy), "--out", "d", cwd=tmp_path).returncode == 1
    assert not (tmp_path / "d" / "verdict.json").exists()


def test_inspect_names_files_and_residuals_and_writes_nothing(case: Path, tmp_path: Path) -> None:
    done = _run("inspect", str(case), cwd=tmp_path)
    assert done.returncode == 0
    for expected in ("QV-7_hr.dat", "time reversal", "inversion", "meV"):
        assert expected in done.stdout
    assert not list(tmp_path.iterdir())
    found = json.loads(_run("inspect", str(case), "--json", cwd=tmp_path).stdout)
    assert found["time_reversal"]["present"] is True


def test_tasks_shows_the_graph_and_its_state(case: Path, tmp_path: Path) -> None:
    alone = _run("tasks", cwd=tmp_path)
    assert "parity" in alone.stdout
    before = _run("tasks", str(case), "--out", "d", cwd=tmp_path)
    assert "to do" in before.stdout
    _run("vet", str(case), "--out", "d", "--effort", "quick", cwd=tmp_path)
    after = _run("tasks", str(case), "--out", "d", cwd=tmp_path)
    assert "to do" not in after.stdout
    assert "done" in after.stdout


def test_explain_prints_the_page_of_a_flag_and_lists_the_codes(tmp_path: Path) -> None:
    done = _run("explain", "gap-closes", cwd=tmp_path)
    assert done.returncode == 0
    assert "What to do" in done.stdout
    assert _run("explain", cwd=tmp_path).stdout.split() == list(CODES)


def test_explain_suggests_the_nearest_code(tmp_path: Path) -> None:
    done = _run("explain", "spin-order-mismach", cwd=tmp_path)
    assert done.returncode == 1
    assert 'did you mean "spin-order-mismatch"?' in done.stderr
