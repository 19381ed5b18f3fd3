"""A compound of the campaign: how its files are made, and the right answer beside them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from topovet.demo.draft import Draft


@dataclass(frozen=True, slots=True)
class Compound:
    """One case of the campaign.

    Attributes
    ----------
    code
        Name of the compound and its files.
    about
        What it is, one line.
    draft
        Makes its files.
    truth
        Class of the Hamiltonian before anything happened to its files, in the words of a verdict;
        "undetermined" where what is left of it does not say; "" where the case cannot be read.
    z2
        Its indices (nu0, nu1, nu2, nu3), or (nu,) in 2D; None where there are none.
    flags
        Codes that an honest verdict must raise.
    may_stay_open
        Whether "undetermined" is an honest answer too: the truth cannot be had from these files
        alone, or by gapless bands.
    """

    code: str
    about: str
    draft: Callable[[], Draft]
    truth: str
    z2: tuple[int, ...] | None = None
    flags: tuple[str, ...] = ()
    may_stay_open: bool = False
