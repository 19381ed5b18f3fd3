"""Fields of a JSON document of unknown origin: each taken with its type, or refused by name."""

from __future__ import annotations

import json
import math
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from topovet.errors import InputError, quoted
from topovet.intake.opening import open_bytes

LARGEST_BYTES = 32 << 20
"""No verdict is a hundredth of this; a larger file is something else."""

_VET_AGAIN = "vet the case again, or take the folder away"


class Fields:
    """One object of a JSON document, with its place in it.

    Parameters
    ----------
    file
        Where the document lies, for messages.
    content
        The object.
    place
        Its path in the document, e.g. "gap"; empty for the document itself.
    """

    def __init__(self, file: str | Path, content: dict[str, Any], place: str = "") -> None:
        self.file = file
        self._content = content
        self._place = place

    def object(self, key: str) -> Fields:
        value = self._content.get(key)
        if not isinstance(value, dict):
            raise self.refused(key, value, "an object")
        return Fields(self.file, value, self._path(key))

    def maybe_object(self, key: str) -> Fields | None:
        """None where the key is absent or null."""
        return None if self._content.get(key) is None else self.object(key)

    def objects(self, key: str) -> list[Fields]:
        """A list of objects; empty where the key is absent or null."""
        value = self._content.get(key) or []
        if not isinstance(value, list) or not all(isinstance(v, dict) for v in value):
            raise self.refused(key, value, "a list of objects")
        return [Fields(self.file, v, f"{self._path(key)}[{i}]") for i, v in enumerate(value)]

    def text(self, key: str) -> str:
        value = self._content.get(key)
        if not isinstance(value, str):
            raise self.refused(key, value, "a text")
        return encodable(value)

    def maybe_text(self, key: str) -> str:
        """Empty where the key is absent or null."""
        return "" if self._content.get(key) is None else self.text(key)

    def word(self, key: str, known: Sequence[str]) -> str:
        value = self._content.get(key)
        if not isinstance(value, str) or value not in known:
            raise self.refused(key, value, f"one of {', '.join(known)}")
        return value

    def whole(self, key: str, low: int, high: int) -> int:
        value = self._content.get(key)
        if not isinstance(value, int) or isinstance(value, bool) or not low <= value <= high:
            raise self.refused(key, value, f"a whole number from {low} to {high}")
        return value

    def maybe_number(self, key: str) -> float | None:
        """A finite number, None where the key is absent or null."""
        value = self._content.get(key)
        if value is None:
            return None
        if not isinstance(value, int | float) or isinstance(value, bool) or abs(value) > 1e15:
            raise self.refused(key, value, "a number or null")
        return float(value)

    def maybe_integers(self, key: str, lengths: Sequence[int]) -> tuple[int, ...] | None:
        """A list of integers of one of the lengths, None where the key is absent or null."""
        value = self._content.get(key)
        if value is None:
            return None
        whole = isinstance(value, list) and all(type(v) is int for v in value)
        if not whole or len(value) not in lengths:
            raise self.refused(key, value, "a list of integers or null")
        return tuple(value)

    def raw(self, key: str) -> Any:
        """Whatever stands there, None where the key is absent."""
        return self._content.get(key)

    def names(self) -> tuple[str, ...]:
        return tuple(encodable(key) for key in self._content)

    def refused(self, key: str, value: Any, expected: str) -> InputError:
        """The error for a value that is not what it should be."""
        shown = "nothing" if key not in self._content else quoted(json.dumps(value)[:200])
        return InputError(
            self.file,
            found=f"{self._path(key)} = {shown}",
            expected=expected,
            todo=_VET_AGAIN,
        )

    def _path(self, key: str) -> str:
        return f"{self._place}.{key}" if self._place else key


def read_document(path: Path, schema: str) -> Fields:
    """A JSON object that says which schema it follows.

    Raises
    ------
    InputError
        Not readable, too large, not JSON (NaN and infinities included), or of another schema.
    """
    with open_bytes(path) as stream:
        data = stream.read(LARGEST_BYTES + 1)
    if len(data) > LARGEST_BYTES:
        raise InputError(
            path,
            found=f"more than {LARGEST_BYTES >> 20} MiB",
            expected=f"a document of {schema}",
            todo=_VET_AGAIN,
        )
    try:
        content = json.loads(data, parse_constant=_no_constant, parse_float=_finite)
    except (ValueError, RecursionError) as error:
        line = error.lineno if isinstance(error, json.JSONDecodeError) else None
        raise InputError(
            path,
            line=line,
            found="text that is not JSON",
            expected=f"a whole document of {schema}",
            todo=_VET_AGAIN,
        ) from error
    if not isinstance(content, dict) or content.get("schema") != schema:
        said = content.get("schema") if isinstance(content, dict) else None
        raise InputError(
            path,
            found="no schema" if said is None else f"the schema {quoted(str(said))}",
            expected=schema,
            todo="use the version of topovet that wrote it, or " + _VET_AGAIN,
        )
    return Fields(path, content)


def _no_constant(name: str) -> float:
    raise ValueError(f"{name} is no JSON number")


def _finite(text: str) -> float:
    value = float(text)
    if not math.isfinite(value):
        raise ValueError("a number too large")
    return value


def encodable(text: str) -> str:
    """Lone surrogates, which JSON can spell and UTF-8 cannot carry, written out."""
    return text.encode("utf-8", "backslashreplace").decode("utf-8")
