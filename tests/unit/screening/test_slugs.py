"""Folder names for cases: harmless, distinct, the same every time."""

from __future__ import annotations

import re

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from topovet.screening.slugs import case_slugs

HARMLESS = re.compile(r"[A-Za-z0-9][A-Za-z0-9._+~-]{0,79}")


@pytest.mark.parametrize(
    ("name", "slug"),
    [
        ("Bi2Se3", "Bi2Se3"),
        ("GX-12", "GX-12"),
        ("batch_1/GX-12", "batch_1__GX-12"),
        ("a.b+c", "a.b+c"),
    ],
)
def test_plain_names_stay_as_they_are(name: str, slug: str) -> None:
    assert case_slugs([name]) == [slug]


@pytest.mark.parametrize(
    "name",
    [
        "../../etc/passwd",
        "..",
        "/abs",
        ".hidden",
        "-rf",
        "a\nb",
        'x"><script>alert(1)</script>',
        "=HYPERLINK(1)",
        "name with blanks",
        "CON",
        "lpt1.txt",
        "x" * 300,
        "\udcff",
        "Bi₂Se₃",
        "",
        "a__b",
        "a_/b",
        "tail.",
        "x~0123456789",
    ],
)
def test_other_names_become_harmless_and_carry_a_hash(name: str) -> None:
    (slug,) = case_slugs([name])
    assert HARMLESS.fullmatch(slug)
    assert re.search(r"~[0-9a-f]{10}$", slug)


def test_names_that_differ_in_case_alone_get_different_folders_anywhere() -> None:
    slugs = case_slugs(["GX-1", "gx-1", "GX-2"])
    assert len({slug.casefold() for slug in slugs}) == 3
    assert slugs[2] == "GX-2"


def test_equal_names_are_a_mistake() -> None:
    with pytest.raises(ValueError, match="distinct"):
        case_slugs(["a", "a"])


NAMES = st.lists(st.text(alphabet="aAb_./~-\n0é", max_size=6), unique=True, max_size=8)


@given(NAMES)
@settings(max_examples=200, deadline=None)
def test_distinct_names_never_share_a_folder(names: list[str]) -> None:
    slugs = case_slugs(names)
    assert len({slug.casefold() for slug in slugs}) == len(names)
    assert all(HARMLESS.fullmatch(slug) for slug in slugs)
