"""Names of symmetry indicators for people, and what each of them says."""

from __future__ import annotations

_NAMES = {"z4": "Z₄", "s4": "S₄ index", "z8": "Z₈", "z12": "Z₁₂"}
_SUBSCRIPTS = str.maketrans("0123456789", "₀₁₂₃₄₅₆₇₈₉")

_NOTES = {
    "z4": "κ modulo 4, about the stated inversion centre: odd is strong, 2 is crystalline or "
    "higher-order where all Z₂ are 0",
    "s4": "κ₄ modulo 2, the strong index",
    "z8": "κ₁ − 2κ₄ modulo 8 for 4/m: 4 is a mirror or rotation invariant that Z₄ does not see",
    "z12": "for 6/m: κ modulo 4 and mirror Chern numbers modulo 3; formula from memory",
}


def indicator_name(key: str) -> str:
    """Typographic name: "z2w1" is Z₂,w1 and "z4m k=0" the mirror one of that plane."""
    if key in _NAMES:
        return _NAMES[key]
    head, _, place = key.partition(" ")
    kind = "w" if "w" in head else "m"
    order, _, rest = head.removeprefix("z").partition(kind)
    name = f"Z{order.translate(_SUBSCRIPTS)},{kind}{rest}"
    return f"{name}, {place.replace('=', ' = ')}" if place else name


def indicator_note(key: str) -> str:
    """What it says, in one clause."""
    if key in _NOTES:
        return _NOTES[key]
    if key.startswith("z2w"):
        return f"parities of the plane k{key[3:]} = 1/2: the weak index ν{key[3:]}"
    order = key.removeprefix("z").partition("m")[0]
    return f"mirror Chern number modulo {order}, from rotation eigenvalues on the plane"


def open_z2(z2: tuple[int | None, ...]) -> str:
    """1;(–––), with a dash for an index that is not known; a dash alone where none is."""
    shown = ["–" if value is None else str(value) for value in z2]
    if all(value is None for value in z2):
        return "–"
    return f"{shown[0]};({''.join(shown[1:])})" if shown[1:] else shown[0]


def direction(vector: tuple[float, float, float]) -> str:
    """A unit vector with three decimals where they are needed."""
    shown = (f"{c:.3f}".rstrip("0").rstrip(".").replace("-", "−") for c in vector)
    return "(" + ", ".join("0" if c == "−0" else c for c in shown) + ")"
