"""The same case gives the same bytes, however many threads the machine and its BLAS have."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from real_cases import CASES

pytestmark = [pytest.mark.real_data, pytest.mark.endurance]

SURROUNDINGS = (
    {"TOPOVET_THREADS": "1", "OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"},
    {"TOPOVET_THREADS": "5", "OPENBLAS_NUM_THREADS": "3", "OMP_NUM_THREADS": "3"},
)


@pytest.mark.parametrize("name", ["Bi2Se3", "Si"])
def test_threads_move_no_digit(name: str, tmp_path: Path) -> None:
    documents = set()
    for i, surroundings in enumerate(SURROUNDINGS):
        out = tmp_path / str(i)
        subprocess.run(
            [sys.executable, "-m", "topovet", "vet", str(CASES / name), "--out", str(out)],
            env={**os.environ, **surroundings},
            check=True,
            capture_output=True,
        )
        document = json.loads((out / "verdict.json").read_text())
        document["provenance"].pop("task_seconds")
        documents.add(json.dumps(document))
    assert len(documents) == 1
