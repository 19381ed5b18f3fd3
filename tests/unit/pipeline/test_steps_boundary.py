"""The tasks of the boundary on small cases."""

from __future__ import annotations

from pathlib import Path

import pytest

from case_writer import write_case
from chern_models import chern_stack, haldane
from lattice_models import bhz, wilson_dirac
from topovet.pipeline.dossier import start_run, vet_case
from topovet.pipeline.runner import Run


@pytest.fixture(scope="module")
def strong(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_case(wilson_dirac(m=-2.0), tmp_path_factory.mktemp("boundary") / "strong")


def _run(case: Path, **settings) -> Run:
    return start_run(case, settings=settings)


def test_a_case_hears_its_surface(strong: Path, tmp_path: Path) -> None:
    verdict = vet_case(strong, out=tmp_path / "out").verdict
    surface = verdict.witnesses.surface
    assert (surface.status, surface.z2_strong) == ("ok", 1)
    assert verdict.agreement == "agree"
    # E = sqrt(sin^2 k_1 + sin^2 k_2) with a cell of 3.8 angstrom: 3.8 eV angstrom
    numbers = verdict.measurable
    assert numbers["surface_band"]["velocity_eV_ang"] == pytest.approx(3.8, rel=0.01)
    assert numbers["dirac_point"]["status"] == "exposed"
    for name in ("surface", "energy-map", "contours", "landau", "films"):
        assert (tmp_path / "out" / "figures" / f"{name}.svg").is_file()


def test_the_surface_that_is_asked_for_is_followed(strong: Path) -> None:
    run = _run(strong, surface=[1, 1, 0])
    found = run.result("surface")
    assert (found.miller, found.chosen_by) == ((1, 1, 0), "options of the run")
    assert {m.miller for m in run.result("surface-map")} == {(1, 1, 0)}


def test_case_toml_may_ask_too(tmp_path: Path) -> None:
    case = write_case(wilson_dirac(m=-2.0), tmp_path / "case")
    with (case / "case.toml").open("a", encoding="utf-8") as settings:
        settings.write("surface = [2, 2, 2]\n")
    found = _run(case).result("surface")
    assert (found.miller, found.chosen_by) == ((1, 1, 1), "case.toml")


def test_quick_leaves_it_out(strong: Path) -> None:
    run = _run(strong, effort="quick")
    for name in ("surface", "surface-map"):
        assert run.result(name) is None
        assert run.states[name].state == "not-applicable"
        assert "quick" in run.states[name].reason


def test_indices_that_name_no_edge_are_told(tmp_path: Path) -> None:
    run = _run(write_case(bhz(m=1.0), tmp_path / "case"), surface=[0, 0, 1])
    assert run.result("surface") is None
    assert run.states["surface"].state == "failed"
    assert "direction 3 is not periodic" in run.states["surface"].reason


def test_edges_without_time_reversal_count_the_chern_number(tmp_path: Path) -> None:
    verdict = _run(write_case(haldane(m=0.1), tmp_path / "case")).result("verdict")
    assert verdict.witnesses.surface.edge_chern == verdict.invariants.chern == -1
    assert verdict.agreement == "agree"


def test_surfaces_without_kramers_pairs_are_mapped_only(tmp_path: Path) -> None:
    run = _run(write_case(chern_stack(), tmp_path / "case"))
    assert run.result("surface") is None
    assert run.states["surface"].state == "not-applicable"
    assert len(run.result("surface-map")) == 2


def test_a_trivial_surface_is_not_followed(tmp_path: Path) -> None:
    run = _run(write_case(wilson_dirac(m=-3.5), tmp_path / "case"))
    assert run.result("surface-states") is None
    assert run.states["surface-states"].state == "not-applicable"
    assert "odd" in run.states["surface-states"].reason
