"""shortlist.json against its schema; CSV that no spreadsheet runs; Parquet."""

from __future__ import annotations

import csv
import io
import json
import sys
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import jsonschema
import pytest

import invented_shortlists as invented
from invented_shortlists import DISPUTED, FAILURES, HOSTILE_NAMES, SOUND
from topovet.report.json_document import load_schema
from topovet.report.shortlist.columns import (
    COLUMNS,
    MissingLibraryError,
    csv_text,
    write_parquet,
)
from topovet.report.shortlist.document import load_shortlist_schema, shortlist_json
from topovet.report.shortlist.records import TIERS, Gaps, Shortlist

MADE_UP = invented.shortlist([*invented.campaign(120), DISPUTED, SOUND], FAILURES)


@pytest.fixture(scope="module")
def validator() -> jsonschema.Draft202012Validator:
    schema = load_shortlist_schema()
    jsonschema.Draft202012Validator.check_schema(schema)
    return jsonschema.Draft202012Validator(schema)


def _document(shortlist: Shortlist) -> dict[str, Any]:
    document: dict[str, Any] = json.loads(shortlist_json(shortlist))
    return document


@pytest.mark.parametrize(
    "shortlist",
    [MADE_UP, invented.hostile(), invented.shortlist([], []), invented.shortlist([SOUND])],
)
def test_documents_follow_the_schema(
    shortlist: Shortlist, validator: jsonschema.Draft202012Validator
) -> None:
    text = shortlist_json(shortlist)
    assert text == shortlist_json(shortlist)
    assert text.endswith("}\n")
    validator.validate(json.loads(text))


def test_the_document_holds_the_list() -> None:
    document = _document(MADE_UP)
    assert [row["rank"] for row in document["rows"]] == [row.rank for row in MADE_UP.rows]
    assert document["counts"]["listed"] == len(MADE_UP.rows)
    assert sum(document["counts"][tier] for tier in TIERS) == len(MADE_UP.rows)
    for row in document["rows"]:
        if row["merit_points"] is not None:
            assert row["merit_points"] == pytest.approx(sum(p["points"] for p in row["parts"]))


def test_classes_are_those_of_the_verdict() -> None:
    listed = load_shortlist_schema()["properties"]["rows"]["items"]["properties"]
    vetted = load_schema()["properties"]
    assert listed["class"]["enum"] == vetted["class"]["enum"]
    assert listed["agreement"]["enum"] == vetted["agreement"]["enum"]
    assert (
        listed["gap"]["properties"]["status"]["enum"]
        == vetted["gap"]["properties"]["status"]["enum"]
    )


def _set(place: str, value: Any) -> Callable[[dict[str, Any]], None]:
    def change(row: dict[str, Any]) -> None:
        *path, last = place.split(".")
        for step in path:
            row = row[step]
        row[last] = value

    return change


@pytest.mark.parametrize(
    "change",
    [
        _set("surprise", 1),
        _set("rank", 0),
        _set("tier", "undetermined"),
        _set("tier", "trivial"),
        _set("class", "undetermined"),
        _set("class", "trivial"),
        _set("merit_points", None),
        _set("obstacle", "something"),
        _set("agreement", "disagree"),
        _set("gap.direct_eV", "0.2"),
        _set("grade", "E"),
        _set("reasons", []),
        _set("elements", ["bi"]),
    ],
)
def test_schema_refuses(
    change: Callable[[dict[str, Any]], None], validator: jsonschema.Draft202012Validator
) -> None:
    document = _document(invented.shortlist([SOUND]))
    change(document["rows"][0])
    assert not validator.is_valid(document)


@pytest.mark.parametrize("place", ["merit_points", "indices"])
def test_schema_lets_nothing_be_asserted_of_an_undetermined_case(
    place: str, validator: jsonschema.Draft202012Validator
) -> None:
    document = _document(invented.shortlist([DISPUTED]))
    assert validator.is_valid(document)
    document["rows"][0][place] = 3 if place == "merit_points" else "1;(000)"
    assert not validator.is_valid(document)


def _cells(shortlist: Shortlist) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(csv_text(shortlist), newline="")))


def test_csv_reads_back() -> None:
    rows = _cells(MADE_UP)
    assert len(rows) == len(MADE_UP.rows)
    for cells, row in zip(rows, MADE_UP.rows, strict=True):
        assert int(cells["rank"]) == row.rank
        assert cells["name"] == row.candidate.name
        gap = row.candidate.gaps.indirect_ev
        assert cells["gap_indirect_sampled_eV"] == ("" if gap is None else repr(gap))


def test_csv_holds_no_formula() -> None:
    starts = ("=", "+", "-", "@", "\t", "\r", "\n")
    below = Gaps("semimetal-direct-gap", 0.1, None, -0.25)
    listed = invented.hostile()
    extra = invented.shortlist([replace(SOUND, name="-x", gaps=below)])
    texts = {c.name for c in COLUMNS if c.kind == "text"}
    seen = 0
    for cells in _cells(listed) + _cells(extra):
        for name, cell in cells.items():
            if name in texts:
                assert not cell.startswith(starts), (name, cell)
                seen += cell.startswith("'")
    assert seen >= 8
    (row,) = _cells(extra)
    assert row["gap_indirect_sampled_eV"] == "-0.25"  # a number stays a number


def test_energies_carry_their_unit_in_the_heading() -> None:
    for column in COLUMNS:
        if column.kind == "number":
            assert column.name.endswith(("_eV", "_meV", "_points")), column.name


def test_parquet_reads_back(tmp_path: Path) -> None:
    parquet = pytest.importorskip("pyarrow.parquet", reason="pyarrow is not installed")
    path = tmp_path / "x.parquet"
    write_parquet(MADE_UP, path)
    table = parquet.read_table(path)
    assert table.column_names == [c.name for c in COLUMNS]
    assert table.column("rank").to_pylist() == [r.rank for r in MADE_UP.rows]
    assert table.column("merit_points").to_pylist() == [r.merit for r in MADE_UP.rows]
    write_parquet(invented.hostile(), path)
    assert set(HOSTILE_NAMES) <= set(parquet.read_table(path).column("name").to_pylist())


def test_without_pyarrow_the_message_says_what_to_do(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(sys.modules, "pyarrow", None)
    with pytest.raises(MissingLibraryError, match="pip install pyarrow"):
        write_parquet(MADE_UP, tmp_path / "x.parquet")
