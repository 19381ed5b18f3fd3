"""The fast path against its slow twin, on files damaged at random."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from hamiltonian_text import FORMATS, hr_lines, tb_lines, text
from hypothesis import given, settings
from hypothesis import strategies as st

from topovet.errors import InputError
from topovet.intake.hamiltonian import pair_columns
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.hamiltonian.tb import read_tb
from topovet.intake.records import HamiltonianFile

Edit = tuple[str, float, float, int]
Outcome = tuple[object, ...] | str

EDITS = st.lists(
    st.tuples(
        st.sampled_from(["replace", "delete", "insert", "cut", "copy line", "drop line", "swap"]),
        st.floats(0, 1, exclude_max=True),
        st.floats(0, 1, exclude_max=True),
        st.sampled_from(b"0123456789 .-+*EeDd\n\r\tNaN#\x00\xff_"),
    ),
    min_size=1,
    max_size=3,
)


@pytest.fixture(scope="module")
def path(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("edited") / "x_hr.dat"


def edited(content: bytes, edits: list[Edit]) -> bytes:
    for kind, where, other, byte in edits:
        data, lines = bytearray(content), content.split(b"\n")
        at = int(where * len(data))
        i, j = int(where * len(lines)), int(other * len(lines))
        if kind == "replace" and data:
            data[at] = byte
        elif kind == "delete":
            del data[at : at + 1]
        elif kind == "insert":
            data.insert(at, byte)
        elif kind == "cut":
            del data[at:]
        else:
            if kind == "copy line":
                lines.insert(j, lines[i])
            elif kind == "drop line":
                del lines[i]
            else:
                lines[i], lines[j] = lines[j], lines[i]
            data = bytearray(b"\n".join(lines))
        content = bytes(data)
    return content


def outcome(read: Callable[..., HamiltonianFile], path: Path, *, fast: bool) -> Outcome:
    """All that was read, or the message."""
    try:
        found = read(path, fast=fast)
    except InputError as error:
        return str(error)
    centres = None if found.centres_cart is None else found.centres_cart.tobytes()
    numbers = (found.h_r, found.r_cells, found.degeneracies)
    return (*(array.tobytes() for array in numbers), found.decimals, found.header, centres)


@given(
    layout=st.sampled_from(sorted(FORMATS)),
    n_wann=st.sampled_from([1, 2, 3]),
    n_r=st.sampled_from([1, 4, 16]),
    scale=st.sampled_from([0.1, 12.0]),
    edits=EDITS,
    step=st.sampled_from([6, 20, 32_000]),
)
@settings(max_examples=300, deadline=None)
def test_fast_and_thorough_reading_of_hr_agree(
    path: Path, layout: str, n_wann: int, n_r: int, scale: float, edits: list[Edit], step: int
) -> None:
    lines = hr_lines(FORMATS[layout], n_wann=n_wann, n_r=n_r, scale=scale)
    path.write_bytes(edited(text(lines), edits))
    with pytest.MonkeyPatch.context() as patch:
        # Small steps: the damage is met after lines that the fast path has already taken.
        patch.setattr(pair_columns, "LINES_PER_STEP", step)
        assert outcome(read_hr, path, fast=True) == outcome(read_hr, path, fast=False)


@given(
    number=st.sampled_from(["%15.8E", "%12.6f"]),
    n_wann=st.sampled_from([1, 3]),
    edits=EDITS,
    step=st.sampled_from([3, 32_000]),
)
@settings(max_examples=150, deadline=None)
def test_fast_and_thorough_reading_of_tb_agree(
    path: Path, number: str, n_wann: int, edits: list[Edit], step: int
) -> None:
    path.write_bytes(edited(text(tb_lines(number, n_wann=n_wann)), edits))
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(pair_columns, "LINES_PER_STEP", step)
        assert outcome(read_tb, path, fast=True) == outcome(read_tb, path, fast=False)


@given(edit=EDITS.map(lambda edits: edits[0]))
@settings(max_examples=300, deadline=None)
def test_one_edit_is_refused_or_harmless_or_changes_one_element(path: Path, edit: Edit) -> None:
    """In fixed columns a lost, added or moved byte or line never changes a matrix element.

    A byte replaced by another may turn one number into another lawful one, but no more than one.
    """
    whole = text(hr_lines(n_wann=3, n_r=6))
    path.write_bytes(whole)
    undamaged = read_hr(path)
    path.write_bytes(edited(whole, [edit]))
    try:
        found = read_hr(path)
    except InputError:
        return
    changed = np.count_nonzero(found.h_r.view(np.int64) != undamaged.h_r.view(np.int64))
    assert changed <= (edit[0] == "replace")
    assert (found.r_cells == undamaged.r_cells).all()
