"""When a dossier is up to date."""

from __future__ import annotations

import json
import os
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from topovet.intake import discovery
from topovet.pipeline.inputs import find_files, hash_inputs
from topovet.screening import dossier_state
from topovet.screening.dossier_state import STATE_FILE, drop_state, recorded_outcome, write_state
from topovet.screening.records import Outcome

SETTINGS = {"effort": "quick", "surface": [0, 0, 1]}
VETTED = Outcome("x", "vetted", "strong-ti", "B", (("gap-closes", "error"),), 2.0)


class Dossier:
    """A made-up case with a dossier that says it was made from it."""

    def __init__(self, root: Path) -> None:
        self.case, self.folder = root / "case", root / "dossier"
        self.case.mkdir()
        self.folder.mkdir()
        self.hr = self.case / "X_hr.dat"
        self.hr.write_text("one")
        (self.case / "X.win").write_text("win")
        for path in self.case.iterdir():  # files that were left alone for long
            os.utime(path, (1e9, 1e9))
        (self.folder / "verdict.json").write_text("{}")
        (self.folder / "report.html").write_text("<html>")
        self.write()

    def write(self, looked_at: float | None = None) -> None:
        write_state(
            self.folder,
            settings=SETTINGS,
            code="c",
            inputs=hash_inputs(find_files(self.case)),
            outcome=VETTED,
            looked_at=time.time() + 10 if looked_at is None else looked_at,
        )

    def recall(self, settings: dict[str, object] | None = None, code: str = "c") -> Outcome | None:
        return recorded_outcome(
            "x", self.folder, str(self.case), settings=settings or SETTINGS, code=code
        )


@pytest.fixture
def dossier(tmp_path: Path) -> Dossier:
    return Dossier(tmp_path)


def test_an_untouched_case_is_recalled_with_its_conclusion(dossier: Dossier) -> None:
    assert dossier.recall() == Outcome(
        "x", "unchanged", "strong-ti", "B", (("gap-closes", "error"),)
    )


def test_a_companion_that_changed_or_is_named_anew_makes_the_case_anew(dossier: Dossier) -> None:
    companion = dossier.case.parent / "companion"
    companion.mkdir()
    (companion / "Y_hr.dat").write_text("one")
    (dossier.case / "case.toml").write_text('spinless = "../companion"\n')
    assert dossier.recall() is None
    dossier.write()
    assert dossier.recall() is not None
    (companion / "Y_hr.dat").write_text("two")
    assert dossier.recall() is None
    dossier.write()
    (companion / "Y_hr.dat").unlink()
    assert dossier.recall() is None


def test_nothing_is_hashed_where_stamps_agree(
    dossier: Dossier, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(dossier_state, "sha256_of", lambda path: pytest.fail("hashed"))
    assert dossier.recall() is not None


def test_a_young_file_is_told_by_its_hash(
    dossier: Dossier, monkeypatch: pytest.MonkeyPatch
) -> None:
    hashed = []
    real = discovery.sha256_of
    monkeypatch.setattr(dossier_state, "sha256_of", lambda p: (hashed.append(p), real(p))[1])
    dossier.write(looked_at=time.time())
    assert dossier.recall() is not None
    assert len(hashed) == 2


def test_a_touched_file_with_the_same_content_is_unchanged(dossier: Dossier) -> None:
    os.utime(dossier.hr, (2e9, 2e9))
    assert dossier.recall() is not None


def _rewrite_in_place(dossier: Dossier) -> None:
    """Another content, with the size and time of the old one, as rsync can leave it."""
    dossier.hr.write_text("two")
    os.utime(dossier.hr, (1e9, 1e9))


CHANGES: dict[str, Callable[[Dossier], object]] = {
    "content of the same size and time": _rewrite_in_place,
    "longer": lambda d: d.hr.write_text("longer"),
    "file gone": lambda d: (d.case / "X.win").unlink(),
    "file added": lambda d: (d.case / "case.toml").write_text("filling = 1"),
    "other name": lambda d: [p.rename(p.with_name("Y" + p.name[1:])) for p in d.case.iterdir()],
    "case gone": lambda d: [p.unlink() for p in d.case.iterdir()],
    "verdict changed": lambda d: (d.folder / "verdict.json").write_text("{} "),
    "verdict gone": lambda d: (d.folder / "verdict.json").unlink(),
    "report gone": lambda d: (d.folder / "report.html").unlink(),
    "report cut short": lambda d: (d.folder / "report.html").write_text(""),
    "failed since": lambda d: (d.folder / "failure.json").write_text("{}"),
    "state dropped": lambda d: drop_state(d.folder),
}


@pytest.mark.parametrize("change", CHANGES.values(), ids=CHANGES)
def test_any_change_is_noticed(dossier: Dossier, change: Callable[[Dossier], object]) -> None:
    change(dossier)
    assert dossier.recall() is None


def test_other_settings_or_code_are_noticed(dossier: Dossier) -> None:
    assert dossier.recall(settings={**SETTINGS, "effort": "standard"}) is None
    assert dossier.recall(code="d") is None


def test_a_damaged_state_means_not_up_to_date(dossier: Dossier) -> None:
    path = dossier.folder / STATE_FILE
    whole = path.read_text()
    for cut in range(0, len(whole) - 1, 7):
        path.write_text(whole[:cut])
        assert dossier.recall() is None
    for key in json.loads(whole):
        for wrong in (None, 3, "x", [], [1], {"a": 1}):
            path.write_text(json.dumps({**json.loads(whole), key: wrong}))
            recalled = dossier.recall()
            # class and grade are texts for the summary; any text is as good
            assert recalled is None or key in ("class", "grade", "flags", "looked_at"), (key, wrong)
