"""Angular parts of projections: their names, and what `s;px,py;l=-3,mr=1` stands for.

Numbers and names are those of the tables of angular functions and hybrids in the Wannier90 user
guide (chapter on projections), quoted from memory: l = 0..3 for s, p, d, f, l = -1..-5 for sp, sp2,
sp3, sp3d, sp3d2, and mr counts the members of a set from 1.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from types import MappingProxyType

from topovet.intake.wannier_input.win_values import to_int

ANGULAR_NAMES: Mapping[int, tuple[str, ...]] = MappingProxyType(
    {
        0: ("s",),
        1: ("pz", "px", "py"),
        2: ("dz2", "dxz", "dyz", "dx2-y2", "dxy"),
        3: ("fz3", "fxz2", "fyz2", "fz(x2-y2)", "fxyz", "fx(x2-3y2)", "fy(3x2-y2)"),
        -1: ("sp-1", "sp-2"),
        -2: ("sp2-1", "sp2-2", "sp2-3"),
        -3: ("sp3-1", "sp3-2", "sp3-3", "sp3-4"),
        -4: ("sp3d-1", "sp3d-2", "sp3d-3", "sp3d-4", "sp3d-5"),
        -5: ("sp3d2-1", "sp3d2-2", "sp3d2-3", "sp3d2-4", "sp3d2-5", "sp3d2-6"),
    }
)
"""Name of each angular function: l -> names in the order mr = 1, 2, …"""

SET_NAMES: Mapping[str, int] = MappingProxyType(
    {
        "s": 0,
        "p": 1,
        "d": 2,
        "f": 3,
        "sp": -1,
        "sp2": -2,
        "sp3": -3,
        "sp3d": -4,
        "sp3d2": -5,
    }
)
"""Names that stand for a whole set: name -> l."""

_MEMBERS = MappingProxyType(
    {name: (l, mr) for l, names in ANGULAR_NAMES.items() for mr, name in enumerate(names, start=1)}
)
_NUMBERS = re.compile(r"l=([^,]+)(?:,mr=(.+))?")


def parse_angular(text: str) -> tuple[tuple[int, int], ...]:
    """The (l, mr) that an angular specification stands for, in Wannier90's order.

    Whatever order they are listed in, Wannier90 runs through l from -5 to 3 and, within each, mr
    from 1 (`param_get_projections`, from memory), so hybrids come before s, and pz before px; a
    function listed twice counts once.

    Parameters
    ----------
    text
        Lower case, without blanks: sets and members by name, or `l=…,mr=…`, separated by `;`
        (names also by `,`).

    Raises
    ------
    ValueError
        With the part that stands for nothing as its only argument.
    """
    found: set[tuple[int, int]] = set()
    for part in text.split(";"):
        found.update(_numbered(part) if part.startswith("l=") else _named(part))
    return tuple(sorted(found))


def _numbered(part: str) -> list[tuple[int, int]]:
    match = _NUMBERS.fullmatch(part)
    l = to_int(match[1]) if match else None
    if match is None or l is None or l not in ANGULAR_NAMES:
        raise ValueError(part)
    size = len(ANGULAR_NAMES[l])
    if match[2] is None:
        return [(l, mr) for mr in range(1, size + 1)]
    chosen = [to_int(item) for item in match[2].split(",")]
    members = [(l, mr) for mr in chosen if mr is not None and 1 <= mr <= size]
    if len(members) != len(chosen):
        raise ValueError(part)
    return members


def _named(part: str) -> list[tuple[int, int]]:
    members: list[tuple[int, int]] = []
    for name in part.split(","):
        if name in SET_NAMES:
            l = SET_NAMES[name]
            members.extend((l, mr) for mr in range(1, len(ANGULAR_NAMES[l]) + 1))
        elif name in _MEMBERS:
            members.append(_MEMBERS[name])
        else:
            raise ValueError(name)
    return members
