"""Rules from TOML: what is left out keeps its default, what is wrong is named with its line."""

from __future__ import annotations

from pathlib import Path

import pytest

from topovet.errors import InputError
from topovet.screening.merit_rules import default_rules, default_text, read_rules
from topovet.screening.shortlist_reading import AGREEMENTS, CLASSES, GRADES


def _file(folder: Path, text: str) -> Path:
    path = folder / "merit.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_the_shipped_text_reads_as_the_defaults(tmp_path: Path) -> None:
    rules = read_rules(_file(tmp_path, default_text()))
    assert rules.tables == default_rules().tables
    assert rules.source == "merit.toml"
    assert default_rules().source == "defaults"


def test_the_tables_know_every_class_grade_and_agreement() -> None:
    tables = default_rules().tables
    assert set(tables["class"]) == set(CLASSES) - {"undetermined"}
    assert set(tables["grade"]) == set(GRADES)
    assert set(tables["agreement"]) < set(AGREEMENTS)
    assert tables["class"]["trivial"] == tables["class"]["metal"] == 0.0


def test_keys_left_out_keep_their_defaults(tmp_path: Path) -> None:
    rules = read_rules(_file(tmp_path, "[weights]\ngap = 60\n[gap]\nfull_kT = 4"))
    assert rules.weights["gap"] == 60.0
    assert rules.weights["class"] == default_rules().weights["class"]
    assert rules.tables["gap"] == {"full_kT": 4.0, "sampled": 0.8}
    assert list(rules.weights) == list(default_rules().weights)


@pytest.mark.parametrize(
    ("text", "line", "says"),
    [
        ("[weight]\ngap = 1", 1, "write weights"),
        ("[weights]\nclass = 1\ngrad = 2", 3, "write grade"),
        ("[grade]\nA = 1\n[weights]\nA = 2", 4, "no key of [weights]"),
        ("[weights]\ngap = -1", 2, "points from 0 to 1000"),
        ("[weights]\ngap = nan", 2, "points"),
        ("[weights]\ngap = inf", 2, "points"),
        ("[weights]\ngap = true", 2, "points"),
        ("[weights]\ngap = '20'", 2, "points"),
        ("[class]\nstrong-ti = 1.5", 2, "from 0 to 1"),
        ("[gap]\nfull_kT = 0", 2, "above 0"),
        ("[tipping]\nfull_meV = 1e300", 2, "above 0"),
        ("weights = 3", 1, "no table"),
        ("[weights]\ngap = 1\ngap = 2", 3, "not TOML"),
        ("[weights\ngap = 1", 1, "not TOML"),
        ("weights.gap = 5000", 1, "points"),
        ("[weights]\ngap = " + "9" * 400, 2, "points"),
    ],
)
def test_mistakes_are_named(tmp_path: Path, text: str, line: int, says: str) -> None:
    with pytest.raises(InputError) as caught:
        read_rules(_file(tmp_path, text))
    assert says in str(caught.value)
    assert caught.value.line == line


def test_weights_that_are_all_zero_rank_nothing(tmp_path: Path) -> None:
    zeros = "\n".join(f"{name} = 0" for name in default_rules().weights)
    with pytest.raises(InputError, match="all 0"):
        read_rules(_file(tmp_path, f"[weights]\n{zeros}"))


def test_a_missing_file_is_an_input_error(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"none\.toml"):
        read_rules(tmp_path / "none.toml")
