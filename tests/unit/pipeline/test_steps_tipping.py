"""The task: when it runs, on which path, and what it leaves out."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from case_writer import write_case
from lattice_models import LatticeModel, bhz, kane_mele
from topovet.invariants.tipping.results import BY_GAP, BY_PARITY, TippingSearch
from topovet.invariants.tipping.search import choose_parameters
from topovet.model.orbital_groups import OrbitalGroup
from topovet.model.spin_parts import SpinPurity
from topovet.pipeline.dossier import start_run
from topovet.pipeline.runner import Run


def run_of(model: LatticeModel, folder: Path, **settings: Any) -> Run:
    return start_run(write_case(model, folder / "case"), settings=settings)


def test_parity_path_through_the_files(tmp_path: Path) -> None:
    found: TippingSearch = run_of(bhz(m=0.5), tmp_path).result("tipping")
    nearest = min(p.distance_mev for p in found.points if p.distance_mev is not None)
    assert nearest == pytest.approx(1000.0, abs=0.01)
    assert {p.method for p in found.points} == {BY_PARITY}


def test_without_inversion_the_gap_is_followed(tmp_path: Path) -> None:
    """One element: only the scale is left, which tips at lambda_v / (3 sqrt(3) lambda_so)."""
    found: TippingSearch = run_of(kane_mele(lambda_v=0.2), tmp_path).result("tipping")
    assert [p.method for p in found.points] == [BY_GAP]
    assert found.points[0].critical == pytest.approx(0.2 / (0.06 * 27**0.5), abs=1e-4)
    assert found.points[0].z2_after == (0,)
    assert any("only moves the zero" in line for line in found.not_asked)


@pytest.mark.parametrize(
    ("model", "effort", "why"),
    [
        (bhz(m=0.5), "quick", "effort quick"),
        (bhz(m=0.0), "standard", "no witness"),
    ],
)
def test_reasons_not_to_look(model: LatticeModel, effort: str, why: str, tmp_path: Path) -> None:
    run = run_of(model, tmp_path, effort=effort)
    run.result("verdict")
    state = run.states["tipping"]
    assert state.state == "not-applicable"
    assert why in state.reason


def test_what_can_be_turned() -> None:
    groups = [OrbitalGroup(name, (i,)) for i, name in enumerate(("Bi p", "Te p", "I p"))]
    pure, mixed = SpinPurity(1.4, 1.0, 0.04), SpinPurity(1.4, 1.0, 0.9)
    kinds = [(p.name, p.against) for p in choose_parameters(groups, pure)[0]]
    assert kinds == [(g.name, "all others") for g in groups] + [("", "")]
    two, left_out = choose_parameters(groups[:2], mixed)
    assert [(p.name, p.against) for p in two] == [("Bi p", "Te p")]
    assert "mix the spins" in left_out[0]
    none, left_out = choose_parameters(groups[:1], replace(pure, largest_ev=0.0))
    assert none == []
    assert len(left_out) == 2
