"""Declared orbitals that are not closed under the group: the reason is said in words."""

from __future__ import annotations

from pathlib import Path

from case_writer import write_case
from lattice_models import kane_mele
from topovet.pipeline.dossier import start_run


def test_reason_is_a_sentence(tmp_path: Path) -> None:
    write_case(kane_mele(), tmp_path / "case")
    win = next((tmp_path / "case").glob("*.win"))
    win.write_text(win.read_text().replace("pz", "px"))
    run = start_run(tmp_path / "case", settings={"effort": "quick"})
    assert run.result("irreps") is None
    assert "not closed under the group" in run.states["irreps"].reason
    assert run.states["irreps"].reason.split("under the group: ")[1][:1].isalpha()
