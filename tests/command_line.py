"""The command line in this process: what is typed, what comes out, no start-up each time.

Only what needs a process of its own (signals, workers, start-up itself) is worth one.
"""

from __future__ import annotations

import io
import sys
from contextlib import redirect_stderr, redirect_stdout
from dataclasses import dataclass
from pathlib import Path

import pytest

from topovet.cli.main import main


@dataclass(frozen=True, slots=True)
class Outcome:
    """What a command left behind, by the names that `subprocess` uses."""

    returncode: int
    stdout: str
    stderr: str


def run_here(*words: str, cwd: Path) -> Outcome:
    """`topovet WORDS` in a folder; an exception that is no exit is what a traceback would be."""
    out, err = io.StringIO(), io.StringIO()
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(cwd)
        patch.setattr(sys, "argv", ["topovet", *words])
        with redirect_stdout(out), redirect_stderr(err), pytest.raises(SystemExit) as ended:
            main()
    code = ended.value.code
    return Outcome(
        code if isinstance(code, int) else int(bool(code)), out.getvalue(), err.getvalue()
    )
