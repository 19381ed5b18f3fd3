"""What a dossier rests on: files that must stay as they were when they were hashed."""

from __future__ import annotations

import os
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from case_writer import write_case
from lattice_models import bhz
from topovet.errors import InputError
from topovet.intake.discovery import find_case
from topovet.pipeline.catalogue import case_tasks
from topovet.pipeline.dossier import start_run, vet_case
from topovet.pipeline.inputs import check_unchanged, hash_inputs
from topovet.pipeline.steps_intake import read_hamiltonian

QUICK = {"effort": "quick"}


@pytest.fixture
def case(tmp_path: Path) -> Path:
    return write_case(replace(bhz(m=-1.0), name="M"), tmp_path / "M")


def test_unchanged_files_pass_and_changed_ones_are_named(case: Path) -> None:
    files = find_case(case)
    inputs = hash_inputs(files)
    check_unchanged(files, inputs)
    os.utime(case / "M.win", (1, 1))
    with pytest.raises(InputError, match=r"M\.win: found a file that was changed while"):
        check_unchanged(files, inputs)
    (case / "M.win").unlink()
    with pytest.raises(InputError, match="changed while"):
        check_unchanged(files, inputs)


def test_nothing_is_concluded_or_kept_from_a_file_that_changes_while_it_is_read(
    case: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def read_while_it_is_copied(**arguments: Any) -> object:
        with (case / "M_hr.dat").open("a") as hr:
            hr.write("\n")
        return read_hamiltonian(**arguments)

    tasks = [
        replace(task, run=read_while_it_is_copied) if task.name == "hamiltonian" else task
        for task in case_tasks()
    ]
    monkeypatch.setattr("topovet.pipeline.dossier.case_tasks", lambda: tasks)
    with pytest.raises(InputError, match="changed while"):
        vet_case(case, out=tmp_path / "out", settings=QUICK)
    assert not (tmp_path / "out" / "verdict.json").exists()
    assert not (tmp_path / "out" / "tasks").exists()


def test_options_prevail_over_case_toml_and_say_where_they_come_from(case: Path) -> None:
    stated = {"name": "GX-7", "dimension": 2, "filling": 4, "stated_in": "list.csv"}
    centre = {"inversion_centre": [0.5, 0.5, 0.0]}
    verdict = start_run(case, settings={**QUICK, **stated, **centre}).result("verdict")
    assert verdict.case.name == "GX-7"
    assert (verdict.electrons.filling, verdict.electrons.source) == (4, "list.csv")
    assert verdict.provenance.settings["inversion_centre"] == [0.5, 0.5, 0.0]
    alone = start_run(case, settings=QUICK).result("verdict")
    assert (alone.case.name, alone.electrons.source) == ("M", "case.toml")
