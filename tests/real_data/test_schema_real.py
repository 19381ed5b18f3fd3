"""Verdicts of the first-principles cases fit the schema that the package ships."""

from __future__ import annotations

import json
from importlib import resources

import jsonschema
import pytest

from real_cases import CASES, vetted
from topovet.report.json_document import verdict_json

pytestmark = pytest.mark.real_data

SCHEMA = json.loads(
    resources.files("topovet").joinpath("report/verdict.schema.json").read_text(encoding="utf-8")
)


@pytest.mark.parametrize("case", sorted(p.name for p in CASES.iterdir() if p.is_dir()))
def test_verdict_fits_its_schema(case: str) -> None:
    jsonschema.Draft202012Validator(SCHEMA).validate(json.loads(verdict_json(vetted(case))))
