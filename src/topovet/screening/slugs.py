"""Folder names for cases: safe on every file system, one for each case, the same every time."""

from __future__ import annotations

import hashlib
import re
from collections import Counter
from collections.abc import Sequence

_PLAIN_PART = re.compile(r"[A-Za-z0-9](?:[A-Za-z0-9.+-]|_(?!_)){0,78}(?<![_.])")
"""What may stand as it is: no leading dot or dash, no "__", which stands for a slash."""

_LONGEST = 80
_LONGEST_START = 60
_DIGITS = 10

_DEVICES = re.compile(r"(?i)(con|prn|aux|nul|com\d|lpt\d)(\..*)?$")
"""Names that mean a device on Windows, where a result folder may be copied to."""


def case_slugs(names: Sequence[str]) -> list[str]:
    """A folder name for each name, in order.

    A plain name stays as it is, "/" becomes "__". Any other name is cut down to its harmless
    characters and carries a hash of the whole, as do names that differ in case alone. So the folder
    of a case does not depend on what other cases there are, save for those.

    Parameters
    ----------
    names
        Distinct names, of any characters.

    Raises
    ------
    ValueError
        Two names are equal.
    """
    if len(set(names)) != len(names):
        raise ValueError("names of cases must be distinct")
    plain = [_plain(name) for name in names]
    many = Counter(slug.casefold() for slug in plain if slug is not None)
    return [
        _hashed(name) if slug is None or many[slug.casefold()] > 1 else slug
        for name, slug in zip(names, plain, strict=True)
    ]


def _plain(name: str) -> str | None:
    """The name as a folder name, or None where it is not plain enough."""
    parts = name.split("/")
    slug = "__".join(parts)
    # a name that looks like a hashed one could be taken for it
    looks_hashed = re.search(rf"~[0-9a-f]{{{_DIGITS}}}$", slug)
    if len(slug) > _LONGEST or looks_hashed or _DEVICES.match(slug):
        return None
    return slug if all(_PLAIN_PART.fullmatch(part) for part in parts) else None


def _hashed(name: str) -> str:
    start = re.sub(r"[^A-Za-z0-9]+", "-", name).strip("-")[:_LONGEST_START] or "case"
    digest = hashlib.sha256(name.encode("utf-8", "surrogatepass")).hexdigest()
    return f"{start}~{digest[:_DIGITS]}"
