"""Tables of numbers in small text files: read at once, and the line blamed when that fails."""

from __future__ import annotations

import re
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from topovet.arrays import FloatArray
from topovet.errors import InputError, quoted

_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eEdD][+-]?\d{1,3})?")


def read_table(
    path: str | Path, lines: Sequence[str], *, first_line: int, columns: tuple[int, ...], row: str
) -> FloatArray:
    """Lines of finite numbers as an array.

    Fortran's `D` exponents are numbers; overflow stars, nan and infinity are not.

    Parameters
    ----------
    path
        The file, for messages.
    lines
        Its lines, or some of them; none of them blank.
    first_line
        1-based number of the first.
    columns
        Allowed numbers of columns; the same in every line.
    row
        What a line should hold, e.g. "band, k-point and energy".

    Returns
    -------
    FloatArray
        (n_lines, n_columns); (0, columns[0]) without lines.

    Raises
    ------
    InputError
        The first line that does not fit.
    """
    if not lines:
        return np.empty((0, columns[0]))
    split = [line.split() for line in lines]
    width = len(split[0])
    numbers = [_NUMBER.fullmatch(word) for words in split for word in words]
    if width in columns and all(len(words) == width for words in split) and all(numbers):
        text = " ".join(word for words in split for word in words)
        table = np.array(text.replace("D", "E").replace("d", "e").split(), dtype=float)
        if np.isfinite(table).all():
            return table.reshape(len(lines), width)
    expected_width = width if width in columns else columns[0]
    bad = next(
        i
        for i, words in enumerate(split)
        if len(words) != expected_width or not all(_is_finite(word) for word in words)
    )
    raise InputError(
        path,
        line=first_line + bad,
        found=quoted(lines[bad].strip()),
        expected=row,
        todo="copy the file again or let Wannier90 write it again",
    )


def _is_finite(word: str) -> bool:
    if not _NUMBER.fullmatch(word):
        return False
    return bool(np.isfinite(float(word.replace("D", "E").replace("d", "e"))))
