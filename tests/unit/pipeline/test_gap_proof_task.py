"""The proof as a task: when it runs, what is kept of it, and what the verdict takes from it."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from case_writer import write_case
from lattice_models import wilson_dirac
from topovet.pipeline.dossier import start_run, vet_case
from topovet.pipeline.steps_proof import budget
from topovet.pipeline.steps_report import _with_attained
from topovet.spectrum.proof.recheck import recheck
from topovet.spectrum.proof.results import ProvedGap, ProvedIndirectGap


@pytest.fixture(scope="module")
def case(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_case(wilson_dirac(m=-2.0), tmp_path_factory.mktemp("proof") / "case")


@pytest.fixture(scope="module")
def dossier(case: Path) -> Path:
    vet_case(case, out=case.parent / "dossier")
    return case.parent / "dossier"


def test_certificate_is_kept_and_holds_when_read_again(case: Path, dossier: Path) -> None:
    again = start_run(case, out=dossier)
    verdict = again.result("verdict")
    assert verdict.gap.method == "proved"
    assert verdict.gap.direct_proved_min_eV is not None
    assert 1.9 - 1e-9 <= verdict.gap.direct_proved_min_eV <= 2.0 + 1e-9
    kept: ProvedGap = again.result("gap-proof")
    assert again.states["gap-proof"].state == "cached"
    assert kept.proof.n_operations > 1
    model = again.result("hamiltonian-with-basis").lattice.model
    found = recheck(model, kept.certificate)
    assert found.problems == ()
    assert found.lowest_ev - found.cost_ev >= kept.proof.proved_min_ev - 1e-9


def test_the_indirect_gap_is_proved_too(case: Path, dossier: Path) -> None:
    """Bands of the model are even in energy: its indirect gap is its direct one, 2 eV."""
    again = start_run(case, out=dossier)
    verdict = again.result("verdict")
    assert verdict.gap.indirect_proved_min_eV is not None
    assert 1.8 - 1e-9 <= verdict.gap.indirect_proved_min_eV <= 2.0 + 1e-9
    kept: ProvedIndirectGap = again.result("indirect-gap-proof")
    assert again.states["indirect-gap-proof"].state == "cached"
    model = again.result("hamiltonian-with-basis").lattice.model
    for certificate in (kept.valence, kept.conduction):
        assert recheck(model, certificate).problems == ()


def test_quick_effort_proves_nothing_and_says_so(case: Path) -> None:
    verdict = start_run(case, settings={"effort": "quick"}).result("verdict")
    assert (verdict.gap.method, verdict.gap.direct_proved_min_eV) == ("sampled", None)
    assert not verdict.robustness.proved


def test_smaller_gap_met_by_the_proof_is_the_gap(case: Path) -> None:
    run = start_run(case)
    gap, proved = run.result("gap"), run.result("gap-proof")
    assert _with_attained(gap, None) is gap
    assert _with_attained(gap, proved).direct_ev <= gap.direct_ev
    lower = replace(proved, proof=replace(proved.proof, attained_ev=5e-5, k_frac=(0.1, 0.2, 0.3)))
    merged = _with_attained(gap, lower)
    assert (merged.direct_ev, merged.direct_k, merged.status) == (5e-5, (0.1, 0.2, 0.3), "gapless")


def test_budget_falls_with_the_cost_of_a_solve() -> None:
    assert budget("standard", 30) == 16_000
    assert budget("standard", 60) < 16_000 / 5
    assert budget("standard", 1000) == 500
    assert budget("thorough", 30) == 10 * budget("standard", 30)
