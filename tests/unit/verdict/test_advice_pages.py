"""Every flag has its advice page, and a mistyped code is met with the nearest one."""

from __future__ import annotations

import re

import pytest

from topovet.errors import TopovetError
from topovet.verdict.advice import (
    CODES,
    SECTIONS,
    UnknownFlagError,
    advice_page,
    advice_sections,
)

# The list of the interface, in its order.
INTERFACE = (
    "spin-order-mismatch orbital-declaration-wrong inversion-centre-shifted cell-mismatch "
    "filling-off fermi-outside-gap symmetry-broken time-reversal-broken not-hermitian "
    "range-truncated duplicate-r missing-partner-r centres-off gap-closes wilson-unresolved "
    "parity-impure no-spin-orbit witnesses-disagree interpolation-poor inside-error-bar"
)


def test_codes_are_those_of_the_interface() -> None:
    assert " ".join(CODES) == INTERFACE


@pytest.mark.parametrize("code", CODES)
def test_page_has_its_sections(code: str) -> None:
    page = advice_page(code)
    assert page.startswith("# ")
    assert re.findall(r"^## (.+)$", page, re.MULTILINE) == list(SECTIONS)
    assert page.endswith("\n")
    assert max(map(len, page.splitlines())) <= 100


@pytest.mark.parametrize("code", CODES)
def test_page_taken_apart_is_whole(code: str) -> None:
    page = advice_sections(code)
    assert page.title
    assert tuple(heading for heading, _ in page.sections) == SECTIONS
    assert all(len(text.split()) >= 25 for _, text in page.sections)
    assert "- " in page.sections[2][1]


@pytest.mark.parametrize("code", CODES)
def test_pages_refer_to_flags_that_exist(code: str) -> None:
    named = re.findall(r"`([a-z]+(?:-[a-z]+)+)`", advice_page(code))
    assert set(named) <= set(CODES)


@pytest.mark.parametrize("code", ["gap-closes", "inside-error-bar"])
def test_what_this_version_lacks_is_said(code: str) -> None:
    assert "not tested by this version" in advice_page(code).replace("\n", " ").lower()


@pytest.mark.parametrize(
    ("typed", "meant"),
    [("filing-off", "filling-off"), ("Gap_Closes", "gap-closes"), ("parity", "parity-impure")],
)
def test_near_misses_are_suggested(typed: str, meant: str) -> None:
    with pytest.raises(UnknownFlagError, match=f'did you mean "{meant}"') as caught:
        advice_page(typed)
    assert isinstance(caught.value, TopovetError)
    assert caught.value.suggestion == meant


@pytest.mark.parametrize("typed", ["", "../errors", "zzz\x1b[31m"])
def test_codes_from_nowhere_list_all(typed: str) -> None:
    with pytest.raises(UnknownFlagError, match="the codes are: spin-order-mismatch") as caught:
        advice_page(typed)
    assert str(caught.value).isprintable()
