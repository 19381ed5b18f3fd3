"""Results on disk: one file per task and key, written whole or not at all."""

from __future__ import annotations

import contextlib
import os
import tempfile
from pathlib import Path
from typing import Any

from topovet.errors import TopovetError
from topovet.pipeline.codec import Codec, CodecError


class StoreError(TopovetError):
    """The dossier cannot be written."""


def write_atomically(path: Path, data: bytes, *, durable: bool = True) -> None:
    """Write a file so that any reader sees the old contents or the new, never a part.

    Parameters
    ----------
    path
        Its folder is made if need be.
    data
        The whole content.
    durable
        Whether the file must also outlast a loss of power: it is on disk before it gets its name,
        and its name before this returns. Without it a file may come back empty or damaged after
        one, never after the end of a process.

    Raises
    ------
    StoreError
        The disk is full or the place cannot be written; nothing is left behind.
    """
    temporary = None
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        with tempfile.NamedTemporaryFile(
            dir=path.parent, prefix=f".{path.name}.", delete=False
        ) as out:
            temporary = Path(out.name)
            out.write(data)
            out.flush()
            if durable:
                os.fsync(out.fileno())
        temporary.chmod(0o666 & ~_umask())
        os.replace(temporary, path)
        temporary = None
        if durable:
            _sync_folder(path.parent)
    except OSError as error:
        raise StoreError(
            f"{path}: cannot be written ({error.strerror or error}); make room or choose another "
            "place with --out, then run again: finished tasks are kept."
        ) from error
    finally:
        if temporary is not None:
            temporary.unlink(missing_ok=True)


def _sync_folder(folder: Path) -> None:
    """Bring a new name to disk; file systems that cannot do it for a folder do it by themselves."""
    if not hasattr(os, "O_DIRECTORY"):
        return
    with contextlib.suppress(OSError):
        handle = os.open(folder, os.O_RDONLY | os.O_DIRECTORY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


class Store:
    """Results of finished tasks in a folder, by task name and key.

    Parameters
    ----------
    folder
        Made when the first result is written.
    codec
        Knows the dataclasses that occur.
    """

    def __init__(self, folder: Path, codec: Codec) -> None:
        self.folder = folder
        self._codec = codec

    def path(self, name: str, key: str) -> Path:
        return self.folder / f"{name}-{key[:16]}.npz"

    def load(self, name: str, key: str) -> tuple[bool, Any]:
        """(True, result), or (False, None) where there is none or it is damaged."""
        try:
            data = self.path(name, key).read_bytes()
        except OSError:
            return False, None
        try:
            stored_key, value = self._codec.decode(data)
        except (CodecError, ValueError):
            return False, None
        return (True, value) if stored_key == key else (False, None)

    def save(self, name: str, key: str, value: Any) -> None:
        """Keep a result; raises `StoreError` where that is impossible.

        Not made durable: `load` tells a damaged file from a whole one, and the task runs again.
        """
        data = self._codec.encode((key, value))
        write_atomically(self.path(name, key), data, durable=False)
