"""Witnesses laid side by side, index by index."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Statement:
    """What one witness says: Z2 indices, None at an index it has no opinion on.

    One that is not independent rests on what another has read: it can contradict, but two such do
    not agree like two.
    """

    witness: str
    z2: tuple[int | None, ...]
    independent: bool = True


@dataclass(frozen=True, slots=True)
class Agreement:
    """What the witnesses say together.

    Attributes
    ----------
    word
        "agree" (two or more, nowhere contradicting, sharing at least the strong index),
        "disagree", "one-witness" or "undetermined" (none speaks).
    z2
        The indices that stand: complete, and contradicted by no witness; else None.
    disputed
        Names of the disputed indices, e.g. ("nu0", "nu3").
    """

    word: str
    z2: tuple[int, ...] | None
    disputed: tuple[str, ...]


def weigh(statements: Sequence[Statement]) -> Agreement:
    """Compare the statements of the witnesses that speak.

    Parameters
    ----------
    statements
        One for each witness whose status is "ok"; all with as many indices as the dimension has.
    """
    if not statements:
        return Agreement("undetermined", None, ())
    opinions = [{v for v in column if v is not None} for column in _columns(statements)]
    disputed = tuple(f"nu{i}" for i, values in enumerate(opinions) if len(values) > 1)
    if disputed:
        return Agreement("disagree", None, disputed)
    complete = all(opinions)
    z2 = tuple(next(iter(values)) for values in opinions) if complete else None
    voices = sum(statement.z2[0] is not None and statement.independent for statement in statements)
    return Agreement("agree" if voices > 1 else "one-witness", z2, ())


def _columns(statements: Sequence[Statement]) -> list[tuple[int | None, ...]]:
    return list(zip(*(statement.z2 for statement in statements), strict=True))
