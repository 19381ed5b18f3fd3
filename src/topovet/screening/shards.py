"""Splitting a screen over processes that know nothing of each other, as a job array does."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

from topovet.screening.records import ScreenCase


@dataclass(frozen=True, slots=True)
class Shard:
    """Part `index` of `count`, counted from 1."""

    index: int
    count: int

    def __str__(self) -> str:
        return f"{self.index}/{self.count}"


def parse_shard(text: str) -> Shard:
    """The shard written I/N; raises ValueError where it is none."""
    match = re.fullmatch(r"(\d{1,6})/(\d{1,6})", text)
    if match is None:
        raise ValueError(f"{text!r} is not I/N, such as 3/20")
    index, count = int(match[1]), int(match[2])
    if not 1 <= index <= count:
        raise ValueError(f"{text!r}: I counts from 1 to N")
    return Shard(index, count)


def cases_of(shard: Shard, cases: Sequence[ScreenCase]) -> tuple[ScreenCase, ...]:
    """Every `count`-th case, in order of the slugs.

    Dealt out like cards rather than by a hash of the name, so that no shard gets more than one
    case more than another. If cases are added while an array runs, the deal differs between its
    jobs; a last run without a shard finds what was left out, and does nothing where nothing was.
    """
    ordered = sorted(cases, key=lambda case: case.slug)
    return tuple(ordered[shard.index - 1 :: shard.count])
