"""The SQLite index: filters against a plain loop, and the copy on disk."""

from __future__ import annotations

import sqlite3
from collections.abc import Callable
from contextlib import closing
from dataclasses import replace
from pathlib import Path

import pytest

import invented_shortlists as invented
from topovet.pipeline.store import StoreError
from topovet.report.shortlist.records import Candidate, Ranked
from topovet.screening.index import Selection, build_index, save_index, select_ranks
from topovet.screening.merit import limiting_gap
from topovet.screening.merit_rules import default_rules
from topovet.screening.shortlist_ranking import rank

ODD = replace(invented.SOUND, name="Straße 'x' \"y\" %_", formula="?", elements=None, folder="odd")
ROWS = rank([*invented.campaign(150), invented.DISPUTED, ODD], default_rules())


def _gap(c: Candidate) -> float:
    found = limiting_gap(c)
    return -1e9 if found is None else found[0] / 1000


CASES: list[tuple[Selection, Callable[[Candidate], bool]]] = [
    (Selection(), lambda c: True),
    (Selection(classes=("strong-ti",)), lambda c: c.class_ == "strong-ti"),
    (Selection(classes=("metal", "weak-ti")), lambda c: c.class_ in ("metal", "weak-ti")),
    (Selection(grade="B"), lambda c: c.grade in "AB"),
    (Selection(agreements=("disagree",)), lambda c: c.agreement == "disagree"),
    (Selection(dimension=2), lambda c: False),
    (Selection(min_gap_ev=0.1), lambda c: _gap(c) >= 0.1),
    (Selection(min_gap_ev=-0.2), lambda c: _gap(c) >= -0.2),
    (Selection(elements=("Bi",)), lambda c: "Bi" in (c.elements or ())),
    (Selection(elements=("Bi", "Te")), lambda c: {"Bi", "Te"} <= set(c.elements or ())),
    (
        Selection(without_elements=("Pb", "Tl")),
        lambda c: c.elements is not None and not {"Pb", "Tl"} & set(c.elements),
    ),
    (
        Selection(flags=("inside-error-bar",)),
        lambda c: any(f.code == "inside-error-bar" for f in c.flags),
    ),
    (
        Selection(without_flags=("symmetry-broken",)),
        lambda c: all(f.code != "symmetry-broken" for f in c.flags),
    ),
    (Selection(text="STRASSE"), lambda c: c is ODD),
    (Selection(text="%_"), lambda c: c is ODD),
    (Selection(text="' OR 1=1 --"), lambda c: False),
    (
        Selection(classes=("trivial",), grade="A", min_gap_ev=0.05),
        lambda c: c.class_ == "trivial" and c.grade == "A" and _gap(c) >= 0.05,
    ),
]


@pytest.mark.parametrize(("selection", "passes"), CASES)
def test_filters_equal_a_plain_loop(
    selection: Selection, passes: Callable[[Candidate], bool]
) -> None:
    with closing(build_index(ROWS, invented.FAILURES)) as index:
        found = select_ranks(index, selection)
    assert found == tuple(row.rank for row in ROWS if passes(row.candidate))


def test_the_copy_holds_the_whole_list(tmp_path: Path) -> None:
    path = tmp_path / "shortlist.sqlite"
    path.write_text("an older one, damaged")
    with closing(build_index(ROWS, invented.FAILURES)) as index:
        save_index(index, path)
    with closing(sqlite3.connect(path)) as copy:
        assert copy.execute("PRAGMA integrity_check").fetchone() == ("ok",)
        ranks = copy.execute("SELECT rank, name, merit_points FROM candidates ORDER BY rank")
        assert ranks.fetchall() == [(r.rank, r.candidate.name, r.merit) for r in ROWS]
        assert copy.execute("SELECT count(*) FROM failures").fetchone() == (2,)
        summed = copy.execute("SELECT sum(points) FROM parts WHERE rank = 1").fetchone()[0]
        assert summed == pytest.approx(ROWS[0].merit)
    assert [p.name for p in tmp_path.iterdir()] == ["shortlist.sqlite"]


def test_a_place_that_cannot_be_written_is_named(tmp_path: Path) -> None:
    blocked = tmp_path / "file"
    blocked.write_text("x")
    rows: tuple[Ranked, ...] = ()
    with closing(build_index(rows, ())) as index, pytest.raises(StoreError, match="file"):
        save_index(index, blocked / "shortlist.sqlite")
