"""The Snakemake file, where Snakemake is installed: the same results as a plain screen."""

from __future__ import annotations

import shutil
import subprocess
from pathlib import Path

import pytest

from screening_runs import QUICK, Program, results, write_small_cases

SNAKEMAKE = shutil.which("snakemake")

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(SNAKEMAKE is None, reason="Snakemake is not installed"),
]


def test_shards_and_shortlist_by_snakemake(program: Program, tmp_path: Path) -> None:
    write_small_cases(tmp_path / "cases", 4)
    starter = tmp_path / "topovet"
    starter.write_text(f'#!/bin/sh\nexec {" ".join(program.command())} "$@"\n')
    starter.chmod(0o755)
    settings = ("root=cases", "out=dossiers", "shards=2", "effort=quick", f"topovet={starter}")
    file = Path(__file__).parents[2] / "workflows" / "Snakefile"
    done = subprocess.run(
        [str(SNAKEMAKE), "-s", str(file), "--cores", "2", "--config", *settings],
        cwd=tmp_path,
        env=program.environment,
        capture_output=True,
        text=True,
    )
    assert done.returncode == 0, done.stderr
    program.run("screen", "cases", "--out", "plain", *QUICK, cwd=tmp_path)
    assert results(tmp_path / "dossiers") == results(tmp_path / "plain")
    assert (tmp_path / "dossiers" / "shortlist.html").exists()
    assert not (tmp_path / "dossiers" / ".shards").exists()
