"""The whole way: dossiers in a folder to page, JSON, CSV and index."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from invented_shortlists import write_dossier, write_failure
from topovet.screening.index import Selection
from topovet.screening.merit_rules import read_rules
from topovet.screening.shortlist import (
    make_shortlist,
    relative_link,
    selection_words,
    write_shortlist,
)


@pytest.fixture
def dossiers(tmp_path: Path) -> Path:
    root = tmp_path / "dossiers"
    write_dossier(root / "strong")
    write_dossier(
        root / "weak", {"class": "weak-ti", "invariants.z2": [0, 0, 0, 1], "case.name": "W"}
    )
    write_dossier(root / "plain", {"class": "trivial", "invariants.z2": [0] * 4, "case.name": "T"})
    write_dossier(
        root / "odd",
        {"case.formula": "?", "case.name": "O", "gap.direct_eV": None, "gap.indirect_eV": None},
    )
    write_failure(root / "flint")
    return root


def test_everything_is_written_whole(dossiers: Path) -> None:
    found = make_shortlist(dossiers, index_at=dossiers / "shortlist.sqlite")
    written = write_shortlist(found, dossiers, dossiers)
    assert [p.name for p in written] == ["shortlist.html", "shortlist.json", "shortlist.csv"]
    document = json.loads((dossiers / "shortlist.json").read_text("utf-8"))
    assert [row["name"] for row in document["rows"]] == ["Lantern-7", "W", "O", "T"]
    assert document["counts"]["failed"] == 1
    assert (dossiers / "shortlist.sqlite").read_bytes().startswith(b"SQLite format 3")


def test_same_dossiers_give_the_same_bytes(dossiers: Path) -> None:
    def contents() -> list[bytes]:
        found = make_shortlist(dossiers)
        return [p.read_bytes() for p in write_shortlist(found, dossiers, dossiers)]

    assert contents() == contents()


def test_filters_keep_the_ranks_of_the_whole_list(dossiers: Path) -> None:
    found = make_shortlist(dossiers, selection=Selection(classes=("trivial",)))
    assert [(row.rank, row.candidate.name) for row in found.rows] == [(4, "T")]
    assert (found.n_vetted, found.filters) == (4, ("--class trivial",))
    assert len(found.failures) == 1


def test_what_a_filter_cannot_know_is_said(dossiers: Path) -> None:
    found = make_shortlist(dossiers, selection=Selection(without_elements=("Pb",), min_gap_ev=0.1))
    assert found.notes == (
        "Formulas that cannot be read into elements: 1, left out.",
        "Cases without a computed gap: 1, left out.",
    )
    assert make_shortlist(dossiers).notes == ()


def test_rules_of_a_file_change_the_order(dossiers: Path, tmp_path: Path) -> None:
    path = tmp_path / "mine.toml"
    path.write_text("[class]\nweak-ti = 1.0\nstrong-ti = 0.1\n")
    found = make_shortlist(dossiers, rules=read_rules(path))
    assert [row.candidate.name for row in found.rows][:2] == ["W", "Lantern-7"]
    assert found.rules.source == "mine.toml"


def test_links_lead_from_another_folder_into_the_dossiers(dossiers: Path, tmp_path: Path) -> None:
    out = tmp_path / "lists" / "today"
    write_shortlist(make_shortlist(dossiers), dossiers, out)
    assert relative_link(dossiers, out) == "../../dossiers/"
    assert relative_link(dossiers, dossiers) == "./"
    page = (out / "shortlist.html").read_text("utf-8")
    assert '"link":"../../dossiers/strong/report.html"' in page


def test_a_dossier_without_its_page_has_no_link(dossiers: Path) -> None:
    (dossiers / "strong" / "report.html").unlink()
    write_shortlist(make_shortlist(dossiers), dossiers, dossiers)
    page = (dossiers / "shortlist.html").read_text("utf-8")
    assert "strong/report.html" not in page
    assert "weak/report.html" in page


def test_filters_in_words() -> None:
    chosen = Selection(classes=("chern",), grade="B", min_gap_ev=0.1, elements=("Bi", "Se"))
    assert selection_words(chosen) == (
        "--class chern",
        "--element Bi",
        "--element Se",
        "--grade B",
        "--min-gap 0.1",
    )
