"""Finding the spinless companion of a case: the same compound without spin-orbit coupling."""

from __future__ import annotations

import os
from dataclasses import replace
from pathlib import Path

from topovet.errors import InputError, quoted
from topovet.intake.case_toml import line_of_key, read_settings
from topovet.intake.discovery import find_case
from topovet.intake.opening import read_lines
from topovet.intake.records import CaseFiles

EXPECTED = "the case folder, or the _hr.dat, of the same compound without spin-orbit coupling"


def find_companion(files: CaseFiles, stated: str | Path | None = None) -> CaseFiles | None:
    """The files of the companion that is stated, else of the one that `case.toml` names.

    A companion that the companion names in turn is not followed. Where the two share a folder,
    `case.toml` speaks for the case alone.

    Parameters
    ----------
    files
        Of the case.
    stated
        Path of the companion, from the current folder; a relative one in `case.toml` is taken
        from the case folder.

    Raises
    ------
    InputError
        Nothing is there, or what is there is no case; the message names the line of `case.toml`.
    """
    if stated is None:
        stated = _named(files)
    if stated is None:
        return None
    found = find_case(stated)
    return replace(found, settings=None) if found.settings == files.settings else found


def _named(files: CaseFiles) -> Path | None:
    """The path in `case.toml`, with what it is taken from."""
    written = None if files.settings is None else read_settings(files.settings).spinless
    if files.settings is None or written is None:
        return None
    path = Path(files.folder) / written
    if not os.path.exists(path):
        lost = "a link that leads nowhere" if os.path.islink(path) else "nothing"
        raise InputError(
            files.settings,
            line=line_of_key("spinless", read_lines(files.settings)),
            found=f"spinless = {quoted(written, 200)}, where there is {lost}",
            expected=EXPECTED,
            todo="correct the path, which is taken from the case folder, or delete the line",
        )
    return path
