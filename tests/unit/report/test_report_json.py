"""verdict.json: the schema is strict and follows the dataclasses, the text is deterministic."""

from __future__ import annotations

import dataclasses
import json
import typing
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import jsonschema
import numpy as np
import pytest

import invented_dossiers as invented
from topovet.report.json_document import NonFiniteNumberError, load_schema, verdict_json
from topovet.verdict.advice import CODES
from topovet.verdict.document import Verdict
from topovet.verdict.flags import SEVERITIES, Flag

CASES = [invented.strong, invented.sheet, invented.undetermined, invented.hostile]

# The arrows of this list are the enumerations that the interface fixes.
FIXED = {
    ("gap", "status"): "insulator semimetal-direct-gap gapless unresolved",
    ("agreement",): "agree disagree one-witness undetermined",
    ("class",): "strong-ti weak-ti crystalline-ti higher-order chern axion-candidate trivial "
    "weyl-semimetal dirac-semimetal nodal-line metal undetermined",
    ("confidence", "grade"): "A B C D",
    ("witnesses", "parity", "status"): "ok not-applicable failed",
    ("time_reversal", "spin_order"): "interlaced block none",
    ("inversion", "basis"): "declared inferred none",
}


@pytest.fixture(scope="module")
def schema() -> dict[str, Any]:
    return load_schema()


@pytest.fixture(scope="module")
def validator(schema: dict[str, Any]) -> jsonschema.Draft202012Validator:
    return jsonschema.Draft202012Validator(schema)


def _document(verdict: Verdict) -> dict[str, Any]:
    parsed: dict[str, Any] = json.loads(verdict_json(verdict))
    return parsed


def test_schema_is_a_valid_schema(schema: dict[str, Any]) -> None:
    jsonschema.Draft202012Validator.check_schema(schema)


@pytest.mark.parametrize("build", CASES)
def test_verdicts_meet_the_schema(
    build: Callable[[], Any], validator: jsonschema.Draft202012Validator
) -> None:
    validator.validate(_document(build().verdict))


@pytest.mark.parametrize(("place", "values"), FIXED.items())
def test_enumerations_are_those_of_the_interface(
    schema: dict[str, Any], place: tuple[str, ...], values: str
) -> None:
    node = schema
    for step in place:
        node = node["properties"][step]
    assert node["enum"] == values.split()


def test_schema_knows_every_flag_code(schema: dict[str, Any]) -> None:
    flag = schema["properties"]["flags"]["items"]["properties"]
    assert tuple(flag["code"]["enum"]) == CODES
    assert tuple(flag["severity"]["enum"]) == SEVERITIES


LATER = {"diagnosis", "mirror", "lower_gaps", "nodes", "node_search", "band_representations"} | {
    *("z2_partial", "edge_chern", "miller", "chosen_by", "terminations"),
    "indirect_proved_min_eV",
    "connections",
    "allowed",
}
"""Keys that older dossiers lack and that a reader must not ask for."""


def test_schema_follows_the_dataclasses(schema: dict[str, Any]) -> None:
    compared = _compare(Verdict, schema)
    assert compared >= 15


def _compare(entry: Any, node: dict[str, Any]) -> int:
    """Fields against properties, through all entries; how many dataclasses were met."""
    hints = typing.get_type_hints(entry)
    names = {f.name.rstrip("_") for f in dataclasses.fields(entry)}
    assert set(node["properties"]) == names, entry
    assert set(node["required"]) == names - LATER, entry
    assert node["additionalProperties"] is False
    met = 1
    for field in dataclasses.fields(entry):
        for inner in (hints[field.name], *typing.get_args(hints[field.name])):
            if dataclasses.is_dataclass(inner):
                below = node["properties"][field.name.rstrip("_")]
                below = below.get("items", below)
                met += _compare(inner, below.get("anyOf", [below])[0])
    return met


def _set(place: str, value: Any) -> Callable[[dict[str, Any]], None]:
    def change(found: dict[str, Any]) -> None:
        *path, last = place.split(".")
        node = found
        for step in path:
            node = node[step]
        node[last] = value

    return change


@pytest.mark.parametrize(
    "change",
    [
        _set("surprise", 1),
        _set("case.surprise", 1),
        _set("class", "strong"),
        _set("case.dimension", 1),
        _set("inputs", [{"file": "x", "sha256": "short", "bytes": 1}]),
        _set("gap.direct_eV", "0.7"),
        _set("gap.direct_k", [0.0, 0.0]),
        _set("gap.direct_proved_min_eV", 0.6),
        _set("gap.method", "proved"),
        _set("invariants.z2", [1]),
        _set("invariants.z2", [2, 0, 0, 0]),
        _set("invariants.z4", 4),
        _set("invariants.chern", [1, 2]),
        _set("agreement", "disagree"),
        _set("time_reversal.present", False),
        _set("case.spinful", False),
        _set("flags", [{"code": "made-up", "severity": "info", "summary": "s"}]),
    ],
)
def test_schema_refuses(
    change: Callable[[dict[str, Any]], None], validator: jsonschema.Draft202012Validator
) -> None:
    found = _document(invented.strong().verdict)
    change(found)
    assert not validator.is_valid(found)


def test_every_required_key_is_required(validator: jsonschema.Draft202012Validator) -> None:
    whole = _document(invented.strong().verdict)
    for key in set(whole) - LATER:
        assert not validator.is_valid({k: v for k, v in whole.items() if k != key}), key


@pytest.mark.parametrize("number", [float("nan"), float("inf"), np.float64("-inf")])
def test_a_number_that_is_not_finite_is_named(number: float) -> None:
    verdict = invented.strong().verdict
    broken = replace(verdict, robustness=replace(verdict.robustness, errors_meV={"x": number}))
    with pytest.raises(NonFiniteNumberError, match=r"verdict\.robustness\.errors_meV\.x is "):
        verdict_json(broken)


def test_numpy_values_are_written_as_plain_ones() -> None:
    flag = Flag("gap-closes", "info", "s", {"n": np.int64(3), "k": np.array([0.5, 0.0]), "b": True})
    verdict = replace(invented.strong().verdict, flags=(flag,))
    evidence = _document(verdict)["flags"][0]["evidence"]
    assert evidence == {"n": 3, "k": [0.5, 0.0], "b": True}


def test_a_value_without_json_form_is_named() -> None:
    verdict = replace(invented.strong().verdict, measurable={"area": object()})
    with pytest.raises(TypeError, match=r"verdict\.measurable\.area"):
        verdict_json(verdict)


def test_text_is_deterministic_and_ends_a_line() -> None:
    first, second = (verdict_json(invented.hostile().verdict) for _ in range(2))
    assert first == second
    assert first.endswith("}\n")
    first.encode("utf-8")


def test_undecodable_file_names_can_be_written() -> None:
    verdict = invented.strong().verdict
    named = replace(verdict, case=replace(verdict.case, name="a\udcffb"))
    assert _document(named)["case"]["name"] == "a\\udcffb"
