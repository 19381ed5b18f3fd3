"""Screens the cases of fixtures/cases into a folder of dossiers and prints the verdict table."""

from __future__ import annotations

import subprocess
import sys
import time
from pathlib import Path

from topovet.pipeline.dossier import start_run
from topovet.report.text import verdict_table

CASES = Path(__file__).parent.parent / "fixtures" / "cases"


def main(target: Path) -> int:
    """Vet all, one case on each processor; the exit code is 1 if any could not be vetted."""
    started = time.perf_counter()
    command = [sys.executable, "-m", "topovet", "screen", str(CASES), "--out", str(target)]
    done = subprocess.run(command, stdout=subprocess.DEVNULL)  # progress is on stderr
    if done.returncode:
        return done.returncode
    vetted = [c for c in sorted(CASES.iterdir()) if (target / c.name / "verdict.json").exists()]
    print(verdict_table([start_run(c, out=target / c.name).result("verdict") for c in vetted]))
    seconds = time.perf_counter() - started
    print(f"\n{len(vetted)} cases in {seconds:.0f} s; reports: {target}/NAME/report.html")
    return 0 if len(vetted) == len(list(CASES.iterdir())) else 1


if __name__ == "__main__":
    sys.exit(main(Path(sys.argv[1])))
