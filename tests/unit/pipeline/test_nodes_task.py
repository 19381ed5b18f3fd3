"""A Weyl semimetal as a case folder, vetted end to end."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from case_writer import write_case
from lattice_models import fu_kane_mele, wilson_dirac
from node_models import on_axis_dirac
from topovet.pipeline.dossier import start_run
from topovet.report.figures import figure_makers
from topovet.report.html import render_report
from topovet.report.json_document import verdict_json


def test_weyl_semimetal_end_to_end(tmp_path: Path) -> None:
    """Burkov, Balents, PRL 107, 127205 (2011): a Dirac system in a field along z."""
    model = wilson_dirac(m=-2.8, zeeman=0.6)
    case = write_case(model, tmp_path / "case", filling=2, fermi_ev=0.0)
    run = start_run(case, out=tmp_path / "dossier")
    verdict = run.result("verdict")
    assert verdict.class_ == "weyl-semimetal"
    assert verdict.invariants.z2 is None
    assert [n.chirality for n in verdict.nodes or ()] in ([1, -1], [-1, 1])
    written = json.loads(verdict_json(verdict))
    assert written["node_search"]["complete"]
    assert written["node_search"]["chirality_sum"] == 0
    arcs = written["measurable"]["fermi_arcs"]
    # on (0 0 1), normal to the field, the bonds are weakest and both nodes fall on one point
    assert (arcs["status"], arcs["chosen_by"]) == ("agree", "separates the chiralities")
    assert written["measurable"]["surface"]["miller"] == [1, 0, 0]
    ends = np.array([p["k_surface"][1] for p in arcs["projections"]])
    # planes between the nodes that hold the zone's centre are inverted, the others are not: the
    # arc is the straight way through the centre
    assert [a["length_per_ang"] for a in arcs["arcs"]] == pytest.approx(
        [2 * np.pi * np.ptp(ends) / np.linalg.norm(model.crystal.cell[2])] * 2, rel=1e-4
    )
    material = run.result("report-material")
    page = render_report(material, {"nodes": figure_makers(material)["nodes"]()})
    assert 'id="nodes"' in page
    again = start_run(case, out=tmp_path / "dossier")
    assert len(again.result("nodes").points) == 2
    assert again.states["nodes"].state == "cached"
    assert again.result("fermi-arcs").loops == run.result("fermi-arcs").loops
    assert again.states["fermi-arcs"].state == "cached"


def test_dirac_semimetal_of_a_case_folder(tmp_path: Path) -> None:
    case = write_case(on_axis_dirac(), tmp_path / "case", filling=2, fermi_ev=0.0)
    verdict = start_run(case).result("verdict")
    assert verdict.class_ == "dirac-semimetal"
    assert not any(flag.severity == "error" for flag in verdict.flags)


def test_quick_effort_and_gapped_cases_look_for_none(tmp_path: Path) -> None:
    gapless = write_case(fu_kane_mele(), tmp_path / "gapless")
    run = start_run(gapless, settings={"effort": "quick"})
    assert run.result("nodes") is None
    assert "nodes are not looked for" in run.states["nodes"].reason
