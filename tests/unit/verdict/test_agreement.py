"""Witnesses side by side."""

from __future__ import annotations

import pytest

from topovet.verdict.agreement import Statement, weigh

STRONG, WEAK = (1, 0, 0, 0), (0, 0, 0, 1)


@pytest.mark.parametrize(
    ("voices", "word", "z2", "disputed"),
    [
        ([], "undetermined", None, ()),
        ([STRONG], "one-witness", STRONG, ()),
        ([STRONG, STRONG], "agree", STRONG, ()),
        ([STRONG, WEAK], "disagree", None, ("nu0", "nu3")),
        ([STRONG, (1, None, None, None)], "agree", STRONG, ()),
        ([STRONG, (0, None, None, None)], "disagree", None, ("nu0",)),
        ([(1, None, None, None)], "one-witness", None, ()),
        ([STRONG, STRONG, (1, 0, 1, 0)], "disagree", None, ("nu2",)),
        ([(1,), (1,)], "agree", (1,), ()),
    ],
)
def test_weighing(
    voices: list[tuple[int | None, ...]],
    word: str,
    z2: tuple[int, ...] | None,
    disputed: tuple[str, ...],
) -> None:
    result = weigh([Statement(f"w{i}", voice) for i, voice in enumerate(voices)])
    assert (result.word, result.z2, result.disputed) == (word, z2, disputed)
