"""A Weyl semimetal as a case folder, vetted end to end."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from case_writer import write_case
from lattice_models import fu_kane_mele, wilson_dirac
from node_models import on_axis_dirac
from topovet.pipeline.dossier import start_run, vet_case


def test_weyl_semimetal_end_to_end(tmp_path: Path) -> None:
    """Burkov, Balents, PRL 107, 127205 (2011): a Dirac system in a field along z."""
    model = wilson_dirac(m=-2.8, zeeman=0.6)
    case = write_case(model, tmp_path / "case", filling=2, fermi_ev=0.0)
    out = tmp_path / "dossier"
    verdict = vet_case(case, out=out).verdict
    assert verdict.class_ == "weyl-semimetal"
    assert verdict.invariants.z2 is None
    assert [n.chirality for n in verdict.nodes or ()] in ([1, -1], [-1, 1])
    written = json.loads((out / "verdict.json").read_text())
    assert written["node_search"]["complete"]
    assert written["node_search"]["chirality_sum"] == 0
    assert 'id="nodes"' in (out / "report.html").read_text()
    assert (out / "figures" / "nodes.svg").exists()
    again = start_run(case, out=out)
    assert len(again.result("nodes").points) == 2
    assert again.states["nodes"].state == "cached"


@pytest.mark.parametrize(("fermi_ev", "class_"), [(0.0, "dirac-semimetal"), (None, "undetermined")])
def test_filling_must_be_sure(fermi_ev: float | None, class_: str, tmp_path: Path) -> None:
    """Two bands higher up the model has a gap: without a Fermi energy, who knows."""
    model = on_axis_dirac()
    case = write_case(model, tmp_path / "case", filling=2, fermi_ev=fermi_ev)
    assert start_run(case).result("verdict").class_ == class_


def test_quick_effort_and_gapped_cases_look_for_none(tmp_path: Path) -> None:
    gapless = write_case(fu_kane_mele(), tmp_path / "gapless")
    run = start_run(gapless, settings={"effort": "quick"})
    assert run.result("findings").nodes is None
    assert "nodes are not looked for" in run.states["nodes"].reason
