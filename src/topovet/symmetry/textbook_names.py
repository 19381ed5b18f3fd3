"""Names of irreps in the textbooks, by characters, for the common little co-groups.

Double groups: the numbers of Koster et al. for cubic, tetragonal, hexagonal and orthorhombic
groups (Γ6, Γ7, Γ8, …); for trigonal ones those of Elliott and of the IV-VI literature, in which
6 is the two-dimensional irrep and 4,5 the pair that time reversal joins (Koster et al. call them
4 and 5, 6). "4,5" and "3,4" stand for either of two conjugate one-dimensional irreps, whose
numbers depend on a choice of sign. Single groups: Bouckaert, Smoluchowski and Wigner for cubic and
trigonal groups, in which the prime of Γ15, Γ25 follows no common rule. All tables from memory;
groups whose names depend on a choice of axes (tetragonal, hexagonal and orthorhombic single groups,
other cyclic groups) are left out.

The characters are those of rotations about one origin, in the sign convention of
`topovet.symmetry.operators.spin_rotation`: a turn by 90 degrees of spin 1/2 has +sqrt(2).

References
----------
Koster, Dimmock, Wheeler, Statz, Properties of the Thirty-Two Point Groups (MIT Press, 1963).
Elliott, Phys. Rev. 96, 280 (1954), doi:10.1103/PhysRev.96.280 (double groups).
Bouckaert, Smoluchowski, Wigner, Phys. Rev. 50, 58 (1936), doi:10.1103/PhysRev.50.58.
Dresselhaus, Dresselhaus, Jorio, Group Theory (Springer, 2008), appendices A and D.
"""

from __future__ import annotations

from math import sqrt

import numpy as np

from topovet.arrays import ComplexArray, IntArray

TABLE_TOLERANCE = 0.1
"""Largest difference to a tabulated character: translations have few digits and stand in phases.
The smallest difference between two irreps is 1."""

Row = tuple[str, int, dict[str, float]]
"""Name, dimension, character of each kind of operation that tells the irreps apart."""

_SQ2, _SQ3 = sqrt(2), sqrt(3)

_KINDS = {
    (1, 3): "1",
    (-1, -3): "-1",
    (1, -1): "2",
    (-1, 1): "m",
    (1, 0): "3",
    (-1, 0): "-3",
    (1, 1): "4",
    (-1, -1): "-4",
    (1, 2): "6",
    (-1, -2): "-6",
}
"""(determinant, trace) of W -> kind of operation."""

_POINT_GROUPS = {
    "m-3m": {"1": 1, "-1": 1, "2": 9, "m": 9, "3": 8, "-3": 8, "4": 6, "-4": 6},
    "-43m": {"1": 1, "2": 3, "m": 6, "3": 8, "-4": 6},
    "432": {"1": 1, "2": 9, "3": 8, "4": 6},
    "4/mmm": {"1": 1, "-1": 1, "2": 5, "m": 5, "4": 2, "-4": 2},
    "-42m": {"1": 1, "2": 3, "m": 2, "-4": 2},
    "4mm": {"1": 1, "2": 1, "m": 4, "4": 2},
    "422": {"1": 1, "2": 5, "4": 2},
    "6/mmm": {"1": 1, "-1": 1, "2": 7, "m": 7, "3": 2, "-3": 2, "6": 2, "-6": 2},
    "-6m2": {"1": 1, "2": 3, "m": 4, "3": 2, "-6": 2},
    "6mm": {"1": 1, "2": 1, "m": 6, "3": 2, "6": 2},
    "622": {"1": 1, "2": 7, "3": 2, "6": 2},
    "-3m": {"1": 1, "-1": 1, "2": 3, "m": 3, "3": 2, "-3": 2},
    "3m": {"1": 1, "m": 3, "3": 2},
    "32": {"1": 1, "2": 3, "3": 2},
    "mmm": {"1": 1, "-1": 1, "2": 3, "m": 3},
    "mm2": {"1": 1, "2": 1, "m": 2},
    "222": {"1": 1, "2": 3},
    "2/m": {"1": 1, "-1": 1, "2": 1, "m": 1},
    "2": {"1": 1, "2": 1},
    "m": {"1": 1, "m": 1},
    "-1": {"1": 1, "-1": 1},
}
"""Number of operations of each kind in the groups that are named."""


def _cubic(fourfold: str) -> tuple[Row, ...]:
    return (
        ("6", 2, {fourfold: _SQ2}),
        ("7", 2, {fourfold: -_SQ2}),
        ("8", 4, {"3": -1.0}),
    )


def _tetragonal(fourfold: str) -> tuple[Row, ...]:
    return (("6", 2, {fourfold: _SQ2}), ("7", 2, {fourfold: -_SQ2}))


def _hexagonal(sixfold: str) -> tuple[Row, ...]:
    return (
        ("7", 2, {sixfold: _SQ3}),
        ("8", 2, {sixfold: -_SQ3}),
        ("9", 2, {sixfold: 0.0, "3": -2.0}),
    )


_TRIGONAL: tuple[Row, ...] = (("4,5", 1, {"3": -1.0}), ("6", 2, {"3": 1.0}))
_RHOMBIC: tuple[Row, ...] = (("5", 2, {}),)
_MONOCLINIC: tuple[Row, ...] = (("3,4", 1, {}),)

_DOUBLE = {
    "m-3m": _cubic("4"),
    "-43m": _cubic("-4"),
    "432": _cubic("4"),
    "4/mmm": _tetragonal("4"),
    "-42m": _tetragonal("-4"),
    "4mm": _tetragonal("4"),
    "422": _tetragonal("4"),
    "6/mmm": _hexagonal("6"),
    "-6m2": _hexagonal("-6"),
    "6mm": _hexagonal("6"),
    "622": _hexagonal("6"),
    "-3m": _TRIGONAL,
    "3m": _TRIGONAL,
    "32": _TRIGONAL,
    "mmm": _RHOMBIC,
    "mm2": _RHOMBIC,
    "222": _RHOMBIC,
    "2/m": _MONOCLINIC,
    "2": _MONOCLINIC,
    "m": _MONOCLINIC,
    "-1": (("2", 1, {}),),
}

_SINGLE: dict[str, tuple[Row, ...]] = {
    "m-3m": (
        ("1", 1, {"4": 1.0, "-1": 1.0}),
        ("2", 1, {"4": -1.0, "-1": 1.0}),
        ("12", 2, {"-1": 2.0}),
        ("15′", 3, {"4": 1.0, "-1": 3.0}),
        ("25′", 3, {"4": -1.0, "-1": 3.0}),
        ("1′", 1, {"4": 1.0, "-1": -1.0}),
        ("2′", 1, {"4": -1.0, "-1": -1.0}),
        ("12′", 2, {"-1": -2.0}),
        ("15", 3, {"4": 1.0, "-1": -3.0}),
        ("25", 3, {"4": -1.0, "-1": -3.0}),
    ),
    "-43m": (
        ("1", 1, {"-4": 1.0}),
        ("2", 1, {"-4": -1.0}),
        ("12", 2, {}),
        ("15", 3, {"-4": -1.0}),
        ("25", 3, {"-4": 1.0}),
    ),
    "-3m": (
        ("1", 1, {"2": 1.0, "-1": 1.0}),
        ("2", 1, {"2": -1.0, "-1": 1.0}),
        ("3", 2, {"-1": 2.0}),
        ("1′", 1, {"2": 1.0, "-1": -1.0}),
        ("2′", 1, {"2": -1.0, "-1": -1.0}),
        ("3′", 2, {"-1": -2.0}),
    ),
    "3m": (("1", 1, {"m": 1.0}), ("2", 1, {"m": -1.0}), ("3", 2, {})),
    "32": (("1", 1, {"2": 1.0}), ("2", 1, {"2": -1.0}), ("3", 2, {})),
}


def operation_kinds(rotations: IntArray) -> tuple[str, ...]:
    """Kind of each operation, "1", "-1", "2", "m", "3", "-3", "4", "-4", "6" or "-6"."""
    determinants = np.round(np.linalg.det(rotations.astype(float))).astype(int)
    traces = np.trace(rotations, axis1=1, axis2=2)
    return tuple(_KINDS[int(d), int(t)] for d, t in zip(determinants, traces, strict=True))


def point_group_symbol(rotations: IntArray) -> str | None:
    """Hermann-Mauguin symbol of a group of distinct rotations, None if it is not one named here."""
    kinds = operation_kinds(rotations)
    counts = {kind: kinds.count(kind) for kind in set(kinds)}
    return next((symbol for symbol, known in _POINT_GROUPS.items() if known == counts), None)


def textbook_number(rotations: IntArray, characters: ComplexArray, *, spinful: bool) -> str | None:
    """Number of an irrep in the textbooks, with its parity for double groups: "8+", "25′".

    Parameters
    ----------
    rotations
        (n, 3, 3) W of the little co-group, each once.
    characters
        (n,) of an irrep that is one of the point group about some origin.
    spinful
        Whether it is double-valued.

    Returns
    -------
    str or None
        None where the group is not tabulated.
    """
    symbol = point_group_symbol(rotations)
    table = (_DOUBLE if spinful else _SINGLE).get(symbol or "")
    if table is None:
        return None
    kinds = np.array(operation_kinds(rotations))
    dimension = round(float(characters[kinds == "1"][0].real))
    parity = ""
    if spinful and np.any(kinds == "-1"):
        parity = "+" if characters[kinds == "-1"][0].real > 0 else "−"
    for name, size, row in table:
        if size == dimension and all(
            np.abs(characters[kinds == kind] - value).max() < TABLE_TOLERANCE
            for kind, value in row.items()
        ):
            return name + parity
    return None
