"""Errors a user can meet, and how one sentence is made of them.

    TopovetError
    +-- InputError        the case cannot be read or is damaged
    +-- UndefinedError    the question has no answer for this Hamiltonian
    |   +-- NoGapError          no gap where one is needed
    |   +-- NoInversionError    the Hamiltonian or its crystal has no inversion
    |   +-- NotATrimError       a k-point that time reversal does not map to itself
    |   +-- NotInvariantError   occupied states that a symmetry does not map to themselves
    +-- ConvergenceError  the budget was spent before the answer was certain

The command line turns any of them into exit code 1; see `topovet.cli.main`.
"""

from __future__ import annotations

from pathlib import Path


class TopovetError(Exception):
    """Base of every error that is meant to be read by the user."""


class InputError(TopovetError):
    """A case that cannot be read: where, what was found, what was expected, what to do.

    Parameters
    ----------
    file
        The file as the user would name it.
    found
        What stands there, without a final stop; quote file contents with `quoted`.
    expected
        What should stand there.
    todo
        What the user can do about it, in the imperative.
    line
        1-based line number, where there is one.
    """

    def __init__(
        self, file: str | Path, *, found: str, expected: str, todo: str, line: int | None = None
    ) -> None:
        where = f"{file}, line {line}" if line is not None else f"{file}"
        super().__init__(f"{where}: found {found}, expected {expected}; {todo}.")
        self.file = str(file)
        self.line = line


class UndefinedError(TopovetError):
    """The question has no answer for this Hamiltonian."""


class NoGapError(UndefinedError):
    """A gap is missing where the question needs one."""


class NoInversionError(UndefinedError):
    """Inversion is not a symmetry here."""


class NotATrimError(UndefinedError):
    """A k-point that is not invariant under k -> -k modulo a reciprocal lattice vector."""


class NotInvariantError(UndefinedError):
    """A symmetry leads out of the occupied subspace."""


class ConvergenceError(TopovetError):
    """A budget was spent before the answer was certain."""


def quoted(text: str | bytes, limit: int = 60) -> str:
    """File contents made safe to print: quoted, control characters escaped, shortened."""
    if isinstance(text, bytes):
        text = text.decode("utf-8", errors="replace")
    text = text.rstrip("\r\n")
    shown = text if len(text) <= limit else text[: limit - 1] + "…"
    return '"' + "".join(c if c.isprintable() else f"\\x{ord(c):02x}" for c in shown) + '"'
