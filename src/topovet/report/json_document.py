"""verdict.json: one way to write it, and the schema that says what it holds."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from importlib import resources
from typing import Any

import numpy as np

from topovet.verdict.document import Verdict


class NonFiniteNumberError(ValueError):
    """A NaN or an infinity reached the verdict: a fault of the program, never of the case.

    JSON has no such numbers, and writing null instead would turn a wrong result into a missing one.
    """


def verdict_json(verdict: Verdict) -> str:
    """The verdict as JSON text, the same bytes for the same verdict, ending in a line feed.

    Raises
    ------
    NonFiniteNumberError
        A number is not finite; the message names its place in the document.
    TypeError
        A value has no JSON form; the message names its place in the document.
    """
    document = plain_document(verdict.as_dict(), "verdict")
    return json.dumps(document, indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def load_schema() -> dict[str, Any]:
    """The JSON Schema (2020-12) of verdict.json."""
    text = resources.files("topovet.report").joinpath("verdict.schema.json").read_text("utf-8")
    schema: dict[str, Any] = json.loads(text)
    return schema


def plain_document(value: Any, where: str) -> Any:
    """Numpy scalars and arrays as plain Python, lone surrogates escaped, numbers checked."""
    if isinstance(value, np.generic | np.ndarray):
        value = value.tolist()
    if isinstance(value, Mapping):
        return {_text(str(key)): plain_document(v, f"{where}.{key}") for key, v in value.items()}
    if isinstance(value, list | tuple):
        return [plain_document(v, f"{where}[{i}]") for i, v in enumerate(value)]
    if isinstance(value, float) and not math.isfinite(value):
        raise NonFiniteNumberError(f"{where} is {value}; JSON has no such number")
    if isinstance(value, str):
        return _text(value)
    if value is None or isinstance(value, bool | int | float):
        return value
    raise TypeError(f"{where} is a {type(value).__name__}, which has no JSON form")


def _text(value: str) -> str:
    """File names may hold undecodable bytes (surrogates), which UTF-8 cannot carry."""
    return value.encode("utf-8", "backslashreplace").decode("utf-8")
