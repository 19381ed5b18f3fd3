"""A hash of the code that makes dossiers: another version of it means that they are made anew."""

from __future__ import annotations

import functools
import hashlib
from pathlib import Path

import topovet

OUTSIDE = ("cli", "screening", "demo", "report/shortlist", "report/templates/shortlist", "api.py")
"""Parts of the package that no dossier depends on."""


@functools.cache
def code_digest() -> str:
    """SHA-256 over the files of the package that a dossier depends on.

    The version alone would not do: between two releases it stays while the code changes. Finished
    tasks are still recalled by their own versions, so that making a dossier anew is cheap.
    """
    root = Path(topovet.__file__).parent
    digest = hashlib.sha256()
    for path in sorted(root.rglob("*")):
        name = path.relative_to(root).as_posix()
        if name.startswith(OUTSIDE) or "__pycache__" in name or not path.is_file():
            continue
        content = path.read_bytes()
        digest.update(f"{name}\0{len(content)}\0".encode())
        digest.update(content)
    return digest.hexdigest()
