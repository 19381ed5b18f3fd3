"""Angular specifications: names, numbers, and Wannier90's order."""

from __future__ import annotations

import re

import pytest

from topovet.intake.wannier_input.angular import ANGULAR_NAMES, SET_NAMES, parse_angular


def names(text: str) -> list[str]:
    return [ANGULAR_NAMES[l][mr - 1] for l, mr in parse_angular(text)]


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("s", ["s"]),
        ("p", ["pz", "px", "py"]),
        ("d", ["dz2", "dxz", "dyz", "dx2-y2", "dxy"]),
        ("f", ["fz3", "fxz2", "fyz2", "fz(x2-y2)", "fxyz", "fx(x2-3y2)", "fy(3x2-y2)"]),
        ("sp", ["sp-1", "sp-2"]),
        ("sp2", ["sp2-1", "sp2-2", "sp2-3"]),
        ("sp3", ["sp3-1", "sp3-2", "sp3-3", "sp3-4"]),
        ("sp3d", ["sp3d-1", "sp3d-2", "sp3d-3", "sp3d-4", "sp3d-5"]),
        ("sp3d2", ["sp3d2-1", "sp3d2-2", "sp3d2-3", "sp3d2-4", "sp3d2-5", "sp3d2-6"]),
        ("p;s", ["s", "pz", "px", "py"]),
        ("px;py;pz", ["pz", "px", "py"]),
        ("py,px", ["px", "py"]),
        ("d;sp3;s", ["sp3-1", "sp3-2", "sp3-3", "sp3-4", "s", *ANGULAR_NAMES[2]]),
        ("sp3d2-6;sp-2", ["sp3d2-6", "sp-2"]),
        ("s;s;l=0", ["s"]),
        ("l=1", ["pz", "px", "py"]),
        ("l=1,mr=2,3", ["px", "py"]),
        ("l=1,mr=3,2", ["px", "py"]),
        ("l=-3", ["sp3-1", "sp3-2", "sp3-3", "sp3-4"]),
        ("l=-3,mr=4", ["sp3-4"]),
        ("l=2,mr=1,4", ["dz2", "dx2-y2"]),
        ("l=2,mr=1,4;s;l=1,mr=1", ["s", "pz", "dz2", "dx2-y2"]),
    ],
)
def test_parse_angular(text: str, expected: list[str]) -> None:
    assert names(text) == expected


@pytest.mark.parametrize("l", ANGULAR_NAMES)
def test_every_member_has_a_name_and_a_number(l: int) -> None:
    for mr, name in enumerate(ANGULAR_NAMES[l], start=1):
        assert parse_angular(name) == ((l, mr),)
        assert parse_angular(f"l={l},mr={mr}") == ((l, mr),)


def test_sets_have_as_many_members_as_functions() -> None:
    sizes = {name: len(ANGULAR_NAMES[l]) for name, l in SET_NAMES.items()}
    assert sizes == {
        "s": 1, "p": 3, "d": 5, "f": 7, "sp": 2, "sp2": 3, "sp3": 4, "sp3d": 5, "sp3d2": 6,
    }  # fmt: skip


@pytest.mark.parametrize(
    ("text", "blamed"),
    [
        ("g", "g"),
        ("", ""),
        ("s;", ""),
        ("s;pw", "pw"),
        ("sp3-5", "sp3-5"),
        ("sp4", "sp4"),
        ("l=4", "l=4"),
        ("l=-6", "l=-6"),
        ("l=", "l="),
        ("l=1.5", "l=1.5"),
        ("l=1,mr=4", "l=1,mr=4"),
        ("l=1,mr=0", "l=1,mr=0"),
        ("l=-1,mr=3", "l=-1,mr=3"),
        ("l=1,mr=", "l=1,mr="),
        ("l=1,2", "l=1,2"),
        ("mr=1", "mr=1"),
    ],
)
def test_parse_angular_blames_the_part(text: str, blamed: str) -> None:
    with pytest.raises(ValueError, match=f"^{re.escape(blamed)}$"):
        parse_angular(text)
