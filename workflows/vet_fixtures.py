"""Vets every case in fixtures/cases into a folder of dossiers and prints the verdict table."""

from __future__ import annotations

import sys
import time
from pathlib import Path

from topovet.errors import TopovetError
from topovet.pipeline.dossier import vet_case
from topovet.report.text import verdict_table

CASES = Path(__file__).parent.parent / "fixtures" / "cases"


def main(target: Path) -> int:
    """Vet all; the exit code is 1 if any case could not be vetted."""
    verdicts, failed = [], 0
    started = time.perf_counter()
    for case in sorted(CASES.iterdir()):
        print(f"vetting {case.name} …", file=sys.stderr, flush=True)
        try:
            verdicts.append(vet_case(case, out=target / case.name).verdict)
        except TopovetError as error:
            print(f"{case.name}: {error}", file=sys.stderr)
            failed += 1
    print(verdict_table(verdicts))
    seconds = time.perf_counter() - started
    print(f"\n{len(verdicts)} cases in {seconds:.0f} s; reports: {target}/NAME/report.html")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main(Path(sys.argv[1])))
