"""TOML files that people write by hand: parsed, or refused in one sentence."""

from __future__ import annotations

import re
import sys
from pathlib import Path
from typing import Any

from topovet.errors import InputError, quoted

if sys.version_info >= (3, 11):
    import tomllib
else:
    import tomli as tomllib


def parse_toml(path: str | Path, lines: list[str], *, expected: str, todo: str) -> dict[str, Any]:
    """The tables of a file.

    Parameters
    ----------
    path
        Named in messages.
    lines
        Its content.
    expected, todo
        Of the sentence with which it is refused.

    Raises
    ------
    InputError
        It is not TOML; names the line where that is known.
    """
    try:
        return tomllib.loads("\n".join(lines) + "\n")
    except (ValueError, RecursionError) as error:
        at = re.search(r"at line (\d+)", str(error))
        line = int(at.group(1)) if at else None
        shown = quoted(lines[line - 1]) if line is not None and line <= len(lines) else "text"
        raise InputError(
            path, line=line, found=f"{shown}, which is not TOML", expected=expected, todo=todo
        ) from error
