"""A report that cannot be made costs neither the verdict nor its figures."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import pytest

from case_writer import write_case
from lattice_models import kane_mele
from topovet.pipeline import dossier
from topovet.pipeline.dossier import vet_case

HOSTILE = "<script>alert(1)</script>"


def test_the_verdict_stands_and_the_page_says_what_is_missing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    model = replace(kane_mele(lambda_v=0.1), name="K")
    case = write_case(model, tmp_path / "case")
    (case / "case.toml").write_text(f'filling = 2\ndimension = 2\nname = "{HOSTILE}"\n')

    def broken(material: object, figures: object) -> str:
        raise KeyError("a name that no template knows")

    monkeypatch.setattr(dossier, "render_report", broken)
    made = vet_case(case, out=tmp_path / "out", settings={"effort": "quick"})
    written = json.loads((tmp_path / "out" / "verdict.json").read_text())
    assert written["invariants"]["z2"] == [1]
    page = (tmp_path / "out" / "report.html").read_text()
    assert page == made.report_html
    assert "The report could not be made; log.txt says why" in page
    assert "<script" not in page
    assert "Z2 = 1" in page
    assert "a name that no template knows" in (tmp_path / "out" / "log.txt").read_text()
