"""Screens as a user starts them, over small lattice models, and what their results are."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import topovet
from case_writer import write_case
from lattice_models import bhz

QUICK = ("--effort", "quick")
ALONE = (*QUICK, "--workers", "1")
"""Where a second worker would only cost its start."""


@dataclass(frozen=True, slots=True)
class Program:
    """A copy of the package that stays as it is.

    A screen makes dossiers anew when the program has changed; whoever works on the program while
    the tests run would make them fail.
    """

    folder: Path

    @property
    def environment(self) -> dict[str, str]:
        own = {k: v for k, v in os.environ.items() if not k.startswith(("SLURM_", "SBATCH_"))}
        return {**own, "PYTHONPATH": str(self.folder)}

    def command(self, *words: str | Path) -> list[str]:
        return [sys.executable, "-m", "topovet", *map(str, words)]

    def run(self, *words: str | Path, cwd: Path | None = None) -> subprocess.CompletedProcess[str]:
        """Run to the end; whatever happens, no traceback is shown."""
        done = subprocess.run(
            self.command(*words),
            env=self.environment,
            cwd=cwd,
            capture_output=True,
            text=True,
            timeout=300,
        )
        assert "Traceback" not in done.stderr, done.stderr
        return done

    def start(self, *words: str | Path) -> subprocess.Popen[str]:
        """Start in a process group of its own, output thrown away."""
        return subprocess.Popen(
            self.command(*words),
            env=self.environment,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
            text=True,
            start_new_session=True,
        )


def copy_program(folder: Path) -> Program:
    """The package as it is now, without what Python compiled of it."""
    package = Path(topovet.__file__).parent
    shutil.copytree(package, folder / "topovet", ignore=shutil.ignore_patterns("__pycache__"))
    return Program(folder)


def write_small_cases(root: Path, count: int) -> list[Path]:
    """Two-dimensional models on both sides of their transition, half a second of work each."""
    cases = []
    for i in range(count):
        model = replace(bhz(m=-2.5 + 3.0 * (i + 0.5) / count), name=f"M{i:02d}")
        cases.append(write_case(model, root / f"batch{i % 2}" / model.name))
    return cases


def results(out: Path) -> dict[str, str]:
    """Name of each dossier below a folder -> its verdict or failure, without times.

    Raises
    ------
    ValueError
        A file is not whole.
    """
    found = {}
    for folder in sorted(path for path in out.iterdir() if path.is_dir()):
        parts = {
            name: _without_times(json.loads((folder / name).read_text(encoding="utf-8")))
            for name in ("verdict.json", "failure.json")
            if (folder / name).exists()
        }
        found[folder.name] = json.dumps(parts, indent=1)
    return found


def whole_files(out: Path) -> int:
    """Read every result file of a screen that may be running; the number of those that are there.

    Raises
    ------
    ValueError
        One is cut short or damaged.
    """
    count = 0
    for path in out.glob("*/*"):
        try:
            data = path.read_bytes()
        except (FileNotFoundError, IsADirectoryError):
            continue
        if path.suffix == ".json" and not path.name.startswith("."):
            json.loads(data)
            count += 1
        elif path.name == "report.html":
            if not data.rstrip().endswith(b"</html>"):
                raise ValueError(f"{path} is cut short")
            count += 1
    return count


def _without_times(document: dict[str, Any]) -> dict[str, Any]:
    document.pop("when", None)
    if "provenance" in document:
        document["provenance"].pop("task_seconds")
    return document
