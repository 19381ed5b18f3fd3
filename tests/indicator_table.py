"""Indicator groups of the 230 space groups with time reversal, as recalled from the paper.

Po, Vishwanath, Watanabe, Nat. Commun. 8, 50 (2017), doi:10.1038/s41467-017-00133-2, tables of X_BS
with and without spin-orbit coupling. Written down from memory, not copied; groups that are not
listed have the trivial group.
"""

from __future__ import annotations

Factors = tuple[int, ...]

SPINFUL: dict[Factors, str] = {
    (2,): "81 82 111-122 215-220",
    (3,): "188 190",
    (4,): "52 56 58 60-62 70 88 126 130 133 135-138 141 142 163 165 167 202 203 205 222 223 227 "
    "228 230",
    (8,): "128 225 226",
    (12,): "176 192-194",
    (2, 4): "14 15 48 50 53-55 57 59 63 64 66 68 71-74 84-86 125 129 131 132 134 147 148 162 164 "
    "166 200 201 204 206 224",
    (2, 8): "87 124 139 140 229",
    (3, 3): "174 187 189",
    (4, 8): "127 221",
    (6, 12): "175 191",
    (2, 2, 4): "11-13 49 51 65 67 69",
    (2, 4, 8): "83 123",
    (2, 2, 2, 4): "2 10 47",
}

SPINLESS: dict[Factors, str] = {
    (2,): "3 11 14 27 37 48-50 52-54 56 58 60 66 68 70 75 77 82 85 86 88 103 124 128 130 "
    "162-167 171 172 176 184 192 201 203",
    (2, 2): "12 13 15 81 84 87",
    (2, 4): "147 148",
    (2, 2, 2): "10 83 175",
    (2, 2, 2, 4): "2",
}


NOT_RECALLED = (45, 168, 230)
"""Without spin-orbit coupling the memory of these three is unsure; they are not compared."""


def published_group(number: int, *, spinful: bool) -> Factors:
    """Orders of the cyclic factors of X_BS, each a divisor of the next."""
    table = SPINFUL if spinful else SPINLESS
    return next((f for f, text in table.items() if number in _numbers(text)), ())


def _numbers(text: str) -> set[int]:
    found: set[int] = set()
    for part in text.split():
        first, _, last = part.partition("-")
        found |= set(range(int(first), int(last or first) + 1))
    return found
