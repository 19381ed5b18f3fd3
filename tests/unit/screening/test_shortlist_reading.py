"""From dossiers to candidates: strict, and never believing a verdict that contradicts itself."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

import invented_dossiers
from invented_shortlists import HOSTILE_NAMES, write_dossier, write_failure
from topovet.errors import InputError
from topovet.report.json_document import load_schema, verdict_json
from topovet.screening.shortlist_reading import (
    AGREEMENTS,
    CLASSES,
    GRADES,
    elements_of,
    folder_link,
    read_candidate,
    read_failure,
)
from topovet.screening.shortlist_scan import scan_dossiers

ERROR = {
    "code": "gap-closes",
    "severity": "error",
    "summary": "It closes.",
    "evidence": {},
    "advice": "a",
}


def _candidate(folder: Path, changes: dict[str, Any] | None = None) -> Any:
    return read_candidate(write_dossier(folder / "case", changes), folder)


def test_words_are_those_of_the_schema() -> None:
    properties = load_schema()["properties"]
    assert tuple(properties["agreement"]["enum"]) == AGREEMENTS
    assert set(properties["class"]["enum"]) == set(CLASSES)
    assert tuple(properties["confidence"]["properties"]["grade"]["enum"]) == GRADES


def test_a_sound_dossier(tmp_path: Path) -> None:
    found = _candidate(tmp_path)
    assert (found.name, found.formula, found.elements) == ("Lantern-7", "CdTe2", ("Cd", "Te"))
    assert (found.class_, found.indices, found.grade) == ("strong-ti", "1;(000)", "B")
    assert (found.gaps.direct_ev, found.gaps.indirect_ev, found.radius_mev) == (0.7, 0.7, 350.0)
    assert found.error_mev == pytest.approx(0.004 + 0.62 + 0.8)
    assert found.obstacle == ""
    assert found.has_report
    assert found.witnesses[0].says == "Z₂ = 1;(000)"
    assert found.causes == ()


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"agreement": "disagree"}, "disagree"),
        ({"flags": [ERROR]}, "It closes."),
        ({"agreement": "undetermined"}, "No witness"),
    ],
)
def test_a_class_beside_a_contradiction_is_not_believed(
    tmp_path: Path, changes: dict[str, Any], says: str
) -> None:
    found = _candidate(tmp_path, changes)
    assert found.class_ == "undetermined"
    assert found.title == "Undetermined"
    assert found.indices == ""
    assert says in found.obstacle
    assert "strong-ti, is not believed" in found.obstacle


def test_a_class_of_nodes_needs_no_index_witness(tmp_path: Path) -> None:
    changes = {"agreement": "undetermined", "class": "weyl-semimetal", "invariants.z2": None}
    assert _candidate(tmp_path, changes).obstacle == ""


def test_an_undetermined_verdict_says_why(tmp_path: Path) -> None:
    changes = {
        "class": "undetermined",
        "agreement": "undetermined",
        "invariants.z2": None,
        "confidence": {"grade": "D", "reasons": ["no witness gives an index"]},
    }
    assert _candidate(tmp_path, changes).obstacle == "No witness gives an index."


def test_chern_numbers_and_metals(tmp_path: Path) -> None:
    chern = {"class": "chern", "invariants.z2": None, "invariants.chern": [0, 0, -1]}
    assert _candidate(tmp_path, chern).indices == "C = (0, 0, -1)"
    flat = {"class": "chern", "invariants.z2": None, "invariants.chern": 2}
    assert _candidate(tmp_path, flat).indices == "C = 2"


def test_mirror_chern_numbers_are_named(tmp_path: Path) -> None:
    changes = {
        "class": "crystalline-ti",
        "invariants.z2": [0, 0, 0, 0],
        "invariants.mirror_chern": {"k1=0": -2, "k2=0": 2, "k3=0": 0},
        "witnesses.mirror": {
            "status": "ok",
            "reason": "",
            "planes": [{"plane": "k1=0", "mirror_chern": -2}, {"plane": "x", "mirror_chern": None}],
        },
    }
    found = _candidate(tmp_path, changes)
    assert found.indices == "0;(000), |C_m| = 2"
    assert {w.name: w.says for w in found.witnesses}["Mirror Chern numbers"] == "k1=0: -2"


def test_tipping_and_exposure(tmp_path: Path) -> None:
    changes = {
        "robustness.tipping": [{"distance_eV": -0.35}, {"distance_meV": 120.0}, {"what": "x"}],
        "measurable": {"dirac_point": {"exposure_meV": -12.0}},
    }
    found = _candidate(tmp_path, changes)
    assert found.tipping_mev == 120.0
    assert found.exposure_mev == -12.0


def test_a_diagnosis_is_read(tmp_path: Path) -> None:
    cause = {
        "cause": "filling-off",
        "answer": "yes",
        "weight": 0.8,
        "test": "t",
        "finding": "f",
        "evidence": {"n": 1},
        "advice": "a",
        "if_mended": {"z2": [0, 0, 0, 0], "class": "trivial", "gap_eV": 0.212},
        "consequence_of": "cell-mismatch",
    }
    asked = {
        "asked_because": "why",
        "causes": [cause, {**cause, "answer": "no", "if_mended": None}],
    }
    found = _candidate(tmp_path, {"diagnosis": asked})
    assert found.asked_because == "why"
    assert [c.answer for c in found.causes] == ["yes", "no"]
    assert found.causes[0].if_mended == "trivial, Z₂ = 0;(000), gap 212 meV"
    assert found.causes[0].consequence_of == "cell-mismatch"
    assert found.causes[1].if_mended == ""


@pytest.mark.parametrize(
    ("place", "value", "says"),
    [
        ("class", "strong", "class"),
        ("class", None, "class"),
        ("case", [], "case"),
        ("case.name", 3, "case.name"),
        ("case.dimension", "3", "case.dimension"),
        ("case.dimension", True, "case.dimension"),
        ("gap.direct_eV", "0.7", "gap.direct_eV"),
        ("gap.status", "open", "gap.status"),
        ("invariants.z2", [1], "invariants.z2"),
        ("robustness.radius_meV", [], "robustness.radius_meV"),
        ("robustness.errors_meV", None, "robustness.errors_meV"),
        ("flags", [1], "flags"),
        ("flags", [{**ERROR, "severity": "fatal"}], "flags[0].severity"),
        ("confidence.grade", "E", "confidence.grade"),
        ("schema", "topovet.verdict/2", "topovet.verdict/2"),
        ("schema", {"a": 1}, "schema"),
    ],
)
def test_what_is_wrong_is_named(tmp_path: Path, place: str, value: Any, says: str) -> None:
    with pytest.raises(InputError) as caught:
        _candidate(tmp_path, {place: value})
    assert says in str(caught.value)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    "text",
    [
        "",
        "{",
        "[]",
        "null",
        "not json",
        "\x00\x01",
        '{"schema": "topovet.verdict/1"}',
        '{"schema": "topovet.verdict/1", "case": NaN}',
        "[" * 100_000,
        '{"a": 1e999}',
        '{"schema": ' + "9" * 5000 + "}",
    ],
)
def test_a_broken_verdict_is_a_failure_in_one_sentence(tmp_path: Path, text: str) -> None:
    folder = tmp_path / "broken"
    folder.mkdir()
    (folder / "verdict.json").write_text(text)
    write_dossier(tmp_path / "sound")
    found = scan_dossiers(tmp_path)
    assert [c.name for c in found.candidates] == ["Lantern-7"]
    (failure,) = found.failures
    assert (failure.kind, failure.folder) == ("unreadable", "broken")
    assert failure.message.startswith("verdict.json")
    assert str(tmp_path) not in failure.message
    assert "\n" not in failure.message


def test_every_truncation_of_a_verdict_is_a_failure_or_nothing_worse(tmp_path: Path) -> None:
    whole = verdict_json(invented_dossiers.strong().verdict)
    folder = tmp_path / "cut"
    folder.mkdir()
    for length in range(0, len(whole) - 2, 97):
        (folder / "verdict.json").write_text(whole[:length], encoding="utf-8")
        assert len(scan_dossiers(tmp_path).failures) == 1


def test_any_value_taken_away_is_met_with_a_sentence_or_not_needed(tmp_path: Path) -> None:
    whole = json.loads(verdict_json(invented_dossiers.strong().verdict))
    for key in whole:
        for value in (None, [], {}, "x", 7):
            write_dossier(tmp_path / "odd", {key: value})
            found = scan_dossiers(tmp_path)
            assert len(found.candidates) + len(found.failures) == 1


def test_a_recorded_failure(tmp_path: Path) -> None:
    found = read_failure(write_failure(tmp_path / "flint-3"), tmp_path)
    assert (found.kind, found.name, found.line) == ("not-vetted", "Flint-3", 812)
    assert (found.file, found.when) == ("flint_hr.dat", "2031-04-05T06:07:08Z")


def test_a_recorded_failure_wins_over_an_old_verdict(tmp_path: Path) -> None:
    write_failure(write_dossier(tmp_path / "x"))
    found = scan_dossiers(tmp_path)
    assert found.candidates == ()
    assert found.failures[0].kind == "not-vetted"


def test_a_broken_failure_is_still_a_failure(tmp_path: Path) -> None:
    write_failure(tmp_path / "x", error="none")
    (failure,) = scan_dossiers(tmp_path).failures
    assert failure.kind == "unreadable"
    assert "error" in failure.message


@pytest.mark.parametrize("name", HOSTILE_NAMES)
def test_hostile_names_become_one_line_of_text(tmp_path: Path, name: str) -> None:
    found = _candidate(tmp_path, {"case.name": name, "case.formula": name})
    assert found.name.isprintable()
    assert found.elements is None


def test_lone_surrogates_are_written_out(tmp_path: Path) -> None:
    found = _candidate(tmp_path, {"case.name": "a\ud800b"})
    found.name.encode()
    assert found.name == "a\\ud800b"


def test_links_are_encoded(tmp_path: Path) -> None:
    odd = "a b#?%&'\"<:é"
    assert folder_link(tmp_path / odd, tmp_path) == "a%20b%23%3F%25%26%27%22%3C%3A%C3%A9"


@pytest.mark.parametrize(
    ("formula", "expected"),
    [
        ("Bi2Se3", ("Bi", "Se")),
        ("BiTeI", ("Bi", "I", "Te")),
        ("Bi0.5Sb1.5Te3", ("Bi", "Sb", "Te")),
        ("", None),
        ("Xx2", None),
        ("bi2se3", None),
        ("Bi2(Se,Te)3", None),
        ("=Bi", None),
        ("Bi" * 200, None),
    ],
)
def test_elements_of_a_formula(formula: str, expected: tuple[str, ...] | None) -> None:
    assert elements_of(formula) == expected


def test_dossiers_are_found_at_any_depth(tmp_path: Path) -> None:
    write_dossier(tmp_path / "a" / "b" / "c")
    write_dossier(tmp_path / "z")
    write_dossier(tmp_path / "z" / "inner")
    for hidden in ("z/tasks", "z/figures", "z/symmetrised", ".cache/x"):
        write_dossier(tmp_path / hidden)
    (tmp_path / "loop").symlink_to(tmp_path)
    assert [c.folder for c in scan_dossiers(tmp_path).candidates] == ["a/b/c", "z", "z/inner"]
    assert [c.folder for c in scan_dossiers(tmp_path / "z" / "inner").candidates] == ["."]


@pytest.mark.parametrize("make", [lambda p: p.mkdir(), lambda p: p.write_text("x"), lambda p: None])
def test_no_dossiers_is_an_input_error(tmp_path: Path, make: Any) -> None:
    folder = tmp_path / "none"
    make(folder)
    with pytest.raises(InputError, match="dossiers"):
        scan_dossiers(folder)
