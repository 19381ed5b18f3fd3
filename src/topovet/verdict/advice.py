"""The advice page of each flag: what it means, how it is tested, what to do."""

from __future__ import annotations

import difflib
from dataclasses import dataclass
from importlib import resources

from topovet.errors import TopovetError, quoted

CODES: tuple[str, ...] = (
    "spin-order-mismatch",
    "orbital-declaration-wrong",
    "inversion-centre-shifted",
    "cell-mismatch",
    "filling-off",
    "fermi-outside-gap",
    "symmetry-broken",
    "time-reversal-broken",
    "not-hermitian",
    "range-truncated",
    "duplicate-r",
    "missing-partner-r",
    "centres-off",
    "gap-closes",
    "wilson-unresolved",
    "parity-impure",
    "no-spin-orbit",
    "witnesses-disagree",
    "interpolation-poor",
    "inside-error-bar",
)
"""Every flag code, in the order in which the tests are usually read."""

SECTIONS = ("What it means", "How it is tested", "What to do")
"""Headings of a page, in this order."""


class UnknownFlagError(TopovetError):
    """A flag code that does not exist.

    Parameters
    ----------
    code
        What was asked for.
    """

    def __init__(self, code: str) -> None:
        near = difflib.get_close_matches(code.lower().replace("_", "-"), CODES, n=1, cutoff=0.5)
        hint = f'did you mean "{near[0]}"?' if near else "the codes are: " + ", ".join(CODES) + "."
        super().__init__(f"no flag has the code {quoted(code)}; {hint}")
        self.code = code
        self.suggestion = near[0] if near else None


@dataclass(frozen=True, slots=True)
class AdvicePage:
    """An advice page taken apart.

    Attributes
    ----------
    code
        The flag's code.
    title
        Its heading.
    sections
        (heading, Markdown text) in the order of `SECTIONS`.
    """

    code: str
    title: str
    sections: tuple[tuple[str, str], ...]


def advice_page(code: str) -> str:
    """The page as Markdown text.

    Raises
    ------
    UnknownFlagError
        No flag has this code; names the nearest one.
    """
    if code not in CODES:
        raise UnknownFlagError(code)
    page = resources.files("topovet.verdict").joinpath("advice").joinpath(f"{code}.md")
    return page.read_text(encoding="utf-8")


def advice_sections(code: str) -> AdvicePage:
    """The page taken apart at its headings.

    Raises
    ------
    UnknownFlagError
        No flag has this code; names the nearest one.
    """
    head, *parts = ("\n" + advice_page(code)).split("\n## ")
    sections = tuple(
        (heading, body.strip()) for heading, _, body in (p.partition("\n") for p in parts)
    )
    return AdvicePage(code, head.strip().removeprefix("# "), sections)
