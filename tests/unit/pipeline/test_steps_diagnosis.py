"""Experiments as a task: not asked for in a sound case, kept in the cache in a doubtful one."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from case_writer import write_case
from lattice_models import kane_mele
from topovet.diagnosis.results import Experiments
from topovet.pipeline.dossier import start_run
from topovet.pipeline.runner import Run

QUICK = {"effort": "quick"}


def run_of(folder: Path, out: Path | None = None, **settings: object) -> Run:
    return start_run(folder, out=out, settings={**QUICK, **settings})


def test_sound_case_is_not_examined(tmp_path: Path) -> None:
    run = run_of(write_case(kane_mele(), tmp_path / "case"))
    verdict = run.result("verdict")
    assert verdict.class_ == "strong-ti"
    assert run.states["experiments"].state == "not-applicable"
    assert run.states["experiments"].reason == "nothing is in doubt"
    assert verdict.diagnosis.causes == ()


def test_experiments_of_a_doubtful_case_are_kept(tmp_path: Path) -> None:
    folder = write_case(kane_mele(), tmp_path / "case", filling=1)
    first = run_of(folder, tmp_path / "dossier")
    verdict = first.result("verdict")
    assert "flags of severity error" in verdict.diagnosis.asked_because
    cause = verdict.diagnosis.causes[0]
    assert (cause.cause, cause.answer) == ("filling-off", "yes")
    assert cause.if_mended is not None
    assert cause.if_mended.z2 == (1,)
    again = run_of(folder, tmp_path / "dossier")
    assert again.result("verdict").diagnosis == verdict.diagnosis
    assert again.states["experiments"].state == "cached"


def test_noise_is_examined_with_the_declared_operators(tmp_path: Path) -> None:
    model = kane_mele()
    rng = np.random.default_rng(0)
    noise = rng.normal(size=(*model.h_r.shape, 2)) @ np.array([0.004, 0.004j])
    noise += noise[::-1].conj().transpose(0, 2, 1)
    folder = write_case(replace(model, h_r=model.h_r + noise), tmp_path / "case")
    run = run_of(folder)
    experiments: Experiments = run.result("experiments")
    assert {test.of for test in experiments.noise} == {"time reversal", "inversion"}
    average = experiments.of_kind("symmetrised")[0]
    assert average.inversion.violation_mev == pytest.approx(0, abs=1e-6)
    assert average.z2 == (1,)
    assert run.result("verdict").diagnosis.causes[0].cause == "noise"


def test_nothing_else_is_tried_on_a_damaged_file(tmp_path: Path) -> None:
    folder = write_case(kane_mele(), tmp_path / "case", mp_grid=(5, 5, 1))
    text = (folder / "kane_mele_hr.dat").read_text().splitlines()
    degeneracies = text[3].split()
    text[3] = " ".join(["2", *degeneracies[1:-1], "2"])  # no list that a mesh makes
    (folder / "kane_mele_hr.dat").write_text("\n".join(text) + "\n")
    run = run_of(folder)
    flags = {(flag.code, flag.severity) for flag in run.result("verdict").flags}
    assert ("range-truncated", "error") in flags
    assert run.result("experiments").rereadings == ()
