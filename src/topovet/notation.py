"""How numbers, k-points, indices and foreign strings are written in text, HTML and figures."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

ABSENT = "–"
"""Stands where there is no value; the text next to it says why."""

_FRACTIONS = {
    0.0: ("0", "0"),
    1 / 2: ("½", "1/2"),
    1 / 3: ("⅓", "1/3"),
    2 / 3: ("⅔", "2/3"),
    1 / 4: ("¼", "1/4"),
    3 / 4: ("¾", "3/4"),
    1 / 6: ("⅙", "1/6"),
    1 / 8: ("⅛", "1/8"),
    3 / 8: ("⅜", "3/8"),
    1.0: ("1", "1"),
}


def printable(text: str) -> str:
    """The text with control, bidirectional and other unprintable characters escaped.

    Line ends and tabs stay. Strings of a case come from files of unknown origin; a terminal or a
    reader must not be steered by them.
    """
    return "".join(
        c if c.isprintable() or c in "\n\t" else f"\\x{ord(c):02x}"
        for c in text.replace("\r\n", "\n")
    )


def one_line(text: str) -> str:
    """As `printable`, with every run of white space a single blank."""
    return " ".join(printable(text).split())


def ev(value: float | None) -> str:
    """An energy in eV with its unit, see `ev_number`."""
    number = ev_number(value)
    return number if number == ABSENT else f"{number} eV"


def ev_number(value: float | None) -> str:
    """An energy in eV without its unit: three decimals, more for three digits of a small one."""
    if value is None or not math.isfinite(value):
        return ABSENT
    if 0 < abs(value) < 1e-6:
        return "< 0.000001"
    decimals = 3 if value == 0 else min(6, max(3, 2 - math.floor(math.log10(abs(value)))))
    return _minus(f"{value:.{decimals}f}")


def mev(value: float | None) -> str:
    """A residual in meV with its unit, see `mev_number`."""
    number = mev_number(value)
    return number if number == ABSENT else f"{number} meV"


def mev_number(value: float | None) -> str:
    """A residual in meV without its unit: three significant digits, at most three decimals."""
    if value is None or not math.isfinite(value):
        return ABSENT
    if 0 < abs(value) < 1e-3:
        return "< 0.001"
    decimals = 0 if value == 0 else min(3, max(0, 2 - math.floor(math.log10(abs(value)))))
    return _minus(f"{value:.{decimals}f}")


def angstrom(value: float) -> str:
    """A distance in angstrom with its unit: three digits, tiny ones as a bound."""
    return "< 0.001 Å" if 0 < value < 1e-3 else f"{significant(value)} Å"


def significant(value: float, digits: int = 3) -> str:
    """A number with so many significant digits, never in exponent form above 0.0001."""
    if not math.isfinite(value):
        return ABSENT
    if value == 0:
        return "0"
    exponent = math.floor(math.log10(abs(value)))
    if exponent < -4:
        mantissa, _, power = f"{value:.{digits - 1}e}".partition("e")
        return f"{_minus(mantissa)}e{_minus(str(int(power)))}"
    return _minus(f"{value:.{max(0, digits - 1 - exponent)}f}")


def seconds(value: float | None) -> str:
    """A duration with its unit."""
    if value is None or not math.isfinite(value):
        return ABSENT
    if value < 0.0005:
        return "< 1 ms"
    if value < 1:
        return f"{1000 * value:.0f} ms"
    return f"{value:.1f} s" if value < 100 else f"{value:.0f} s"


def fraction(value: float, *, plain: bool = False) -> str:
    """A fractional coordinate, as a vulgar fraction where it is one to five decimals."""
    sign = ("-" if plain else "−") if value < -5e-6 else ""
    for known, (symbol, ascii_form) in _FRACTIONS.items():
        if abs(abs(value) - known) < 5e-6:
            return sign + (ascii_form if plain else symbol)
    return sign + f"{abs(value):.4f}".rstrip("0")


def k_text(k: Sequence[float] | None, *, plain: bool = False) -> str:
    """A fractional k-point or position, e.g. (½, 0, 0)."""
    if k is None:
        return "-" if plain else ABSENT
    return "(" + ", ".join(fraction(x, plain=plain) for x in k) + ")"


def z2_text(z2: Sequence[int] | None, *, plain: bool = False) -> str:
    """Z2 indices as the literature writes them: 1;(000), or one digit in 2D."""
    if z2 is None:
        return "-" if plain else ABSENT
    if len(z2) == 1:
        return str(z2[0])
    return f"{z2[0]};({''.join(str(i) for i in z2[1:])})"


def signed(value: int) -> str:
    """+1 or −1 with a true minus sign."""
    return f"{value:+d}".replace("-", "−")


def nonzero_by_plane(numbers: Mapping[str, int]) -> str:
    """Integers by plane that are not 0: "m(0 0 1) k=0: −2", "1 on m(1 1 0) k=0 and 5 more"."""
    planes: dict[int, list[str]] = {}
    for name, number in numbers.items():
        if number:
            planes.setdefault(number, []).append(name)
    parts = []
    for number, (first, *others) in planes.items():
        shown = _minus(str(number))
        parts.append(
            f"{shown} on {first} and {len(others)} more" if others else f"{first}: {shown}"
        )
    return ", ".join(parts)


def _minus(text: str) -> str:
    return text.replace("-", "−")
