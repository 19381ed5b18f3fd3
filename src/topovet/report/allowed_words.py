"""What indicator values allow, in plain words: one row for each invariant of the group."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

_NAMES = {
    "strong index": "strong index ν₀",
    "weak indices": "weak indices (ν₁ν₂ν₃)",
    "mirror Chern number": "mirror Chern number n_M",
    "layers on the mirror": "half the sum of both n_M",
    "rotation invariant": "rotation invariant δ",
    "screw invariant": "screw invariant δ",
    "glide invariant": "glide invariant δ",
    "inversion invariant": "inversion invariant δ",
    "S4 invariant": "S₄ invariant δ",
}

_KINDS = {
    "rotation invariant": "rotation",
    "screw invariant": "screw",
    "glide invariant": "glide",
    "inversion invariant": "inversion",
    "S4 invariant": "S₄ rotoinversion",
    "mirror Chern number": "mirror",
    "layers on the mirror": "mirror",
}

_MEANINGS = {
    "strong index": "1: an odd number of Dirac cones on every surface",
    "weak indices": "not 0: a stack of layers that are each topological",
    "mirror Chern number": "|n_M| pairs of surface states on faces that the mirror keeps",
    "layers on the mirror": "net number of topological layers on this mirror of the crystal",
    "rotation invariant": "1: as many Dirac cones as the order of the axis on faces normal to it, "
    "and as many helical hinge modes along it",
    "screw invariant": "1: helical hinge modes along the axis",
    "glide invariant": "1: surface states across the gap on faces that the glide keeps",
    "inversion invariant": "1: helical hinge modes, unless a surface state stands in their place",
    "S4 invariant": "1: helical hinge modes, unless a surface state stands in their place",
}

_BESIDE_STRONG = "two strong phases can differ in it; no zero to count from"
"""Of an invariant modulo 2 where the strong index is not known to be 0."""

CANNOT_SAY = (
    "Indicators are read at single k and know every invariant only so far: values that the list "
    "leaves open, and integers beyond their modulus, can differ between phases with the same "
    "indicators, and indicators that are all 0 do not exclude them."
)


@dataclass(frozen=True, slots=True)
class AllowedRow:
    """One line of the table; all fields are text."""

    invariant: str
    protected_by: str
    allowed: str
    found: str
    with_numbers: str
    source: str
    meaning: str


def allowed_rows(entry: Mapping[str, Any]) -> tuple[AllowedRow, ...]:
    """The table from the entry of verdict.json."""
    layered = any(
        i["invariant"] == "strong index" and i["allowed"] == [0] for i in entry["invariants"]
    )
    return tuple(
        AllowedRow(
            invariant=_NAMES[i["invariant"]] + _place(i),
            protected_by=_protection(i),
            allowed=values_text(i, say_open=True),
            found=_found(i["found"]),
            with_numbers=values_text(i["with_mirror_numbers"], say_open=True),
            source=_typographic(i["source"]),
            meaning=_meaning(i, layered=layered),
        )
        for i in entry["invariants"]
    )


@dataclass(frozen=True, slots=True)
class CombinationTable:
    """Sets of values that occur together: heads, and for each set its values and whether it fits
    the mirror Chern numbers that were counted."""

    heads: tuple[str, ...]
    rows: tuple[tuple[tuple[str, ...], bool], ...]


def combination_table(entry: Mapping[str, Any]) -> CombinationTable | None:
    """The sets, with the invariants in which they differ; None where there is only one set."""
    sets = entry["combinations"]
    if not sets:
        return None
    differing = [j for j in range(len(sets[0])) if any(s[j] != sets[0][j] for s in sets)]
    heads = tuple(_head(entry["invariants"][j]) for j in differing)
    rows = tuple(
        (tuple(values_text(s[j]) for j in differing), bool(fits))
        for s, fits in zip(sets, entry["fits_mirror_numbers"], strict=True)
    )
    return CombinationTable(heads, rows)


def counted_any(entry: Mapping[str, Any]) -> bool:
    """Whether mirror Chern numbers stand beside the list."""
    return any(
        i["invariant"] == "mirror Chern number" and i["found"] is not None
        for i in entry["invariants"]
    )


def values_text(values: Mapping[str, Any], *, say_open: bool = False) -> str:
    """ "1", "2 mod 4", "1 or 3 mod 8", "left open (0 or 1)", "left open (any integer)"."""
    if values["allowed"] is None:
        return "left open (any integer)" if say_open else "any integer"
    shown = " or ".join(_one(v) for v in values["allowed"])
    if values["modulus"] is not None:
        return f"{shown} mod {values['modulus']}"
    return f"left open ({shown})" if say_open and values["status"] == "open" else shown


def _one(value: int | Sequence[int]) -> str:
    return _minus(str(value)) if isinstance(value, int) else f"({''.join(map(str, value))})"


def _found(found: int | Sequence[int] | None) -> str:
    return "–" if found is None else _one(found)


def _place(invariant: Mapping[str, Any]) -> str:
    """ ", plane k = 0": Miller indices stand beside it, with the operation."""
    if invariant["invariant"] != "mirror Chern number":
        return ""
    return f", plane {_plane(invariant)}"


def _plane(invariant: Mapping[str, Any]) -> str:
    return str(invariant["planes"][0]).rpartition(" ")[2].replace("=", " = ")


def _protection(invariant: Mapping[str, Any]) -> str:
    if invariant["invariant"] == "strong index":
        return "time reversal"
    if invariant["invariant"] == "weak indices":
        return "lattice translations"
    operation = _minus(invariant["operation"])
    alike = len(invariant["planes"]) - 1
    others = f" and {alike} like it" if alike > 0 else ""
    return f"{_KINDS[invariant['invariant']]} {operation}{others}"


def _head(invariant: Mapping[str, Any]) -> str:
    """ "n_M on m(1 1 0), k = 0", "δ of 4 [0 0 1]"."""
    kind, operation = invariant["invariant"], _minus(invariant["operation"])
    if kind == "mirror Chern number":
        return f"n_M of {operation}, {_plane(invariant)}"
    if kind == "layers on the mirror":
        return f"half sum of {operation}"
    return f"δ of {operation}" if operation else _NAMES[kind]


def _meaning(invariant: Mapping[str, Any], *, layered: bool) -> str:
    counts_crossings = _NAMES[invariant["invariant"]].endswith("δ")
    if counts_crossings and not layered and invariant["status"] == "open":
        return _BESIDE_STRONG
    return _MEANINGS[invariant["invariant"]]


def _typographic(text: str) -> str:
    return (
        text.replace("kappa", "κ")
        .replace("Z2", "Z₂")
        .replace("Z8", "Z₈")
        .replace("k_i", "kᵢ")
        .replace("1/2", "½")
    )


def _minus(text: str) -> str:
    return text.replace("-", "−")
