"""Small `_hr.dat` and `_tb.dat` texts for the tests of their readers."""

from __future__ import annotations

import random
from collections.abc import Sequence

WANNIER90 = "%5d%5d%5d%5d%5d%12.6f%12.6f"
FORMATS = {
    "Wannier90": WANNIER90,
    "narrow indices": "%4d%4d%4d%4d%4d%16.10f%16.10f",
    "wide numbers": "%5d%5d%5d%5d%5d%22.15f%22.15f",
    "eighteen decimals": "%5d%5d%5d%5d%5d%24.18f%24.18f",
    "exponents": "%5d%5d%5d%5d%5d%18.8E%18.8E",
    "single blanks": "%d %d %d %d %d %.6f %.6f",
    "blank for plus": "%3d %3d %3d %3d %3d % .8f % .8f",
}


def hr_lines(
    number: str = WANNIER90, *, n_wann: int = 3, n_r: int = 5, seed: int = 0, scale: float = 2.0
) -> list[str]:
    """Lines of an hr.dat, m fastest; every third number is 0."""
    draw = random.Random(seed)
    lines = [" made for a test", f"{n_wann:12d}", f"{n_r:12d}"]
    lines += _degeneracies(n_r)
    for i in range(n_r):
        r_cell = (i - n_r // 2, draw.randint(-12, 12), 0)
        for n in range(1, n_wann + 1):
            for m in range(1, n_wann + 1):
                lines.append(number % (*r_cell, m, n, *_numbers(draw, 2, scale)))
    return lines


def tb_lines(number: str = "%15.8E", *, n_wann: int = 3, n_r: int = 3, seed: int = 0) -> list[str]:
    """Lines of a tb.dat as Wannier90 lays them out."""
    draw = random.Random(seed)
    lines = [" made for a test", "   2.0  -1.0   9.5", "   0.0   2.5   9.5", "  -2.0  -1.0   9.5"]
    lines += [f"{n_wann:12d}", f"{n_r:12d}", *_degeneracies(n_r)]
    for n_numbers in (2, 6):
        for i in range(n_r):
            lines += ["", f"{i - n_r // 2:5d}    0    0"]
            for n in range(1, n_wann + 1):
                for m in range(1, n_wann + 1):
                    words = [number % value for value in _numbers(draw, n_numbers, 1.0)]
                    lines.append(f"{m:5d}{n:5d}   {' '.join(words)}")
    return lines


def text(lines: Sequence[str], end: str = "\n") -> bytes:
    return "".join(line + end for line in lines).encode()


def _degeneracies(n_r: int) -> list[str]:
    return ["    1" * min(15, n_r - start) for start in range(0, n_r, 15)]


def _numbers(draw: random.Random, count: int, scale: float) -> list[float]:
    return [draw.choice([0.0, draw.gauss(0, scale), draw.gauss(0, 0.01)]) for _ in range(count)]
