"""Results to bytes and back: JSON for the structure, NumPy arrays beside it, never pickle.

A stored result is one `.npz` file; its entry "document" is JSON in which dataclasses, tuples and
arrays are marked, the other entries are the arrays. Only dataclasses that were registered can be
read back, so a manipulated file can yield wrong numbers at worst, never run code.
"""

from __future__ import annotations

import io
import json
import zipfile
import zlib
from dataclasses import fields, is_dataclass
from typing import Any

import numpy as np

DAMAGE = (
    *(zipfile.BadZipFile, zlib.error, OSError, EOFError, NotImplementedError, RuntimeError),
    *(ValueError, KeyError, TypeError, IndexError, AttributeError),
)
"""What reading a damaged archive can raise: each byte of its heads may be wrong."""


class CodecError(Exception):
    """A stored result that cannot be read back: damaged, foreign or from another version."""


class Codec:
    """Encodes and decodes results made of a known set of dataclasses.

    Parameters
    ----------
    types
        The dataclasses that may occur.
    """

    def __init__(self, types: tuple[type, ...]) -> None:
        self._types = {t.__name__: t for t in types}
        if len(self._types) != len(types):
            raise ValueError("two registered dataclasses share a name")

    def encode(self, value: Any) -> bytes:
        """Bytes of one result.

        Raises
        ------
        TypeError
            A part of it is neither plain data, an array nor a registered dataclass.
        """
        arrays: list[np.ndarray[Any, Any]] = []
        document = json.dumps(self._mark(value, arrays), ensure_ascii=False)
        buffer = io.BytesIO()
        entries = {f"a{i}": array for i, array in enumerate(arrays)}
        text = np.frombuffer(document.encode(), dtype=np.uint8)
        np.savez_compressed(buffer, document=text, **entries)  # type: ignore[arg-type]
        return buffer.getvalue()

    def decode(self, data: bytes) -> Any:
        """The result that `encode` was given.

        Raises
        ------
        CodecError
            The bytes are not a whole result of this version.
        """
        try:
            with np.load(io.BytesIO(data), allow_pickle=False) as entries:
                document = json.loads(entries["document"].tobytes().decode())
                return self._unmark(document, entries)
        except DAMAGE as error:
            raise CodecError(str(error)) from error

    def _mark(self, value: Any, arrays: list[np.ndarray[Any, Any]]) -> Any:
        if value is None or isinstance(value, bool | int | float | str):
            return value
        if isinstance(value, np.generic):
            return value.item()
        if isinstance(value, np.ndarray):
            if value.dtype.kind not in "biufc":
                raise TypeError(f"cannot store an array of {value.dtype}")
            arrays.append(value)
            return {"array": f"a{len(arrays) - 1}"}
        if isinstance(value, tuple):
            return {"tuple": [self._mark(v, arrays) for v in value]}
        if isinstance(value, list):
            return [self._mark(v, arrays) for v in value]
        if isinstance(value, dict):
            return {"dict": [[k, self._mark(v, arrays)] for k, v in value.items()]}
        if is_dataclass(value) and type(value).__name__ in self._types:
            marked = {f.name: self._mark(getattr(value, f.name), arrays) for f in fields(value)}
            return {"type": type(value).__name__, "fields": marked}
        raise TypeError(f"cannot store a {type(value).__name__}; register it with the codec")

    def _unmark(self, value: Any, entries: Any) -> Any:
        if isinstance(value, list):
            return [self._unmark(v, entries) for v in value]
        if not isinstance(value, dict):
            return value
        if "array" in value:
            return entries[value["array"]]
        if "tuple" in value:
            return tuple(self._unmark(v, entries) for v in value["tuple"])
        if "dict" in value:
            return {k: self._unmark(v, entries) for k, v in value["dict"]}
        made = {k: self._unmark(v, entries) for k, v in value["fields"].items()}
        return self._types[value["type"]](**made)
