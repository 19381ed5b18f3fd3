"""Lines of integers against Python's own reading of them."""

from __future__ import annotations

import io

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import topovet.intake.shifts.integer_lines as module
from topovet.errors import InputError
from topovet.intake.shifts.integer_lines import IntegerLines, integer_lines

line_texts = st.lists(st.integers(-999_999, 999_999), max_size=6).map(
    lambda values: "  ".join(str(value) for value in values)
)


def read_all(data: bytes) -> list[IntegerLines]:
    return list(
        integer_lines(io.BytesIO(data), "GX", line_no=1, expected="integers", todo="mend it")
    )


@given(st.lists(line_texts, max_size=12), st.booleans(), st.integers(1, 40))
@settings(max_examples=100, deadline=None)
def test_equals_the_plain_reading_in_any_chunks(lines: list[str], ended: bool, chunk: int) -> None:
    data = "\n".join(lines).encode() + b"\n" * ended
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(module, "CHUNK_BYTES", max(chunk, 60))
        parts = read_all(data)
    filled = [(i, line.split()) for i, line in enumerate(lines, start=2) if line.split()]
    values = [int(word) for _, words in filled for word in words]
    assert [v for part in parts for v in part.values.tolist()] == values
    assert [n for part in parts for n in part.words.tolist()] == [len(w) for _, w in filled]
    assert [n for part in parts for n in part.line_no.tolist()] == [i for i, _ in filled]


@pytest.mark.parametrize(
    ("line", "shown"),
    [
        (b"1 2 x", '"1 2 x"'),
        (b"1 2.0", '"1 2.0"'),
        (b"1 -", '"1 -"'),
        (b"1 --2", '"1 --2"'),
        (b"1-1", '"1-1"'),
        (b"1 *****", '"1 *****"'),
        (b"1 1234567", '"1 1234567"'),
        (b"\x00\x01", '"\\x00\\x01"'),
        ("１".encode(), '"１"'),
    ],
)
def test_anything_else_is_refused_with_its_line(line: bytes, shown: str) -> None:
    with pytest.raises(InputError) as caught:
        read_all(b"1 2\n\n-3 4\n" + line + b"\n5\n")
    assert str(caught.value) == f"GX, line 5: found {shown}, expected integers; mend it."


def test_a_file_without_line_ends_is_refused_before_it_fills_the_memory(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(module, "CHUNK_BYTES", 1000)
    with pytest.raises(InputError, match="GX, line 2: "):
        read_all(b"1 " * 100_000)


def test_lines_are_cut_and_joined() -> None:
    (lines,) = read_all(b"1 2\n3\n4 5 6\n")
    np.testing.assert_array_equal(lines.from_line(1).values, [3, 4, 5, 6])
    np.testing.assert_array_equal(lines.up_to_line(2).values, [1, 2, 3])
    joined = lines.up_to_line(1).followed_by(lines.from_line(1))
    np.testing.assert_array_equal(joined.values, lines.values)
    np.testing.assert_array_equal(joined.line_no, [2, 3, 4])
