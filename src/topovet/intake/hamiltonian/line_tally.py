"""Telling a damaged line from a free layout, by what the other lines of the file look like.

Two rules, both about files that are regular but for a few lines:

- *columns*: where right-aligned columns end at the same places in all lines but one, or but one
  in ten, the others are odd. Lines that a too wide number pushed to the right, as C and Python
  do where Fortran prints asterisks, are not.
- *decimals*: where the numbers of a column are written with a fixed number of decimals (some end
  in 0, which no format of varying length leaves standing), any other number is odd.

Numbers with and without exponent may be mixed in a column (Fortran's G format and list-directed
output) and are compared with their like only. In layouts with single blanks no columns can be
told, and only the second rule applies.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import NamedTuple

from topovet.errors import InputError, quoted

_FEW = 10
"""One odd line in this many may be damage; more are a free layout."""
_FEWEST_LINES = 4
_FULL_PRECISION = 12
"""Decimals from which a number may have been written with all its digits."""

_MOST_LAYOUTS = 4096
"""Beyond so many the file has no regular columns, and no more are remembered."""

_TODO = "mend that line, or write the file again"


class NumberStyle(NamedTuple):
    """How a number is written.

    Attributes
    ----------
    decimals
        Digits after the point, of the mantissa where there is an exponent.
    exponent
        Digits of the exponent; 0 without one, -3 where Fortran dropped the letter E.
    """

    decimals: int
    exponent: int

    @property
    def exponent_width(self) -> int:
        """Characters of the exponent with its sign and letter."""
        return {0: 0, -3: 4}.get(self.exponent, self.exponent + 2)


@dataclass(slots=True)
class LineForm:
    """What is known about all lines of one shape.

    Attributes
    ----------
    stops
        Where each column ends.
    rooms
        Blanks before each word, less one for the sign where it carries none.
    styles
        Of each number.
    round_ends
        For each number, whether the last decimal was 0 in a line with these styles; shared by
        the forms that have them.
    line_no, line
        The first line of this shape.
    touching
        Words touch: the line must be cut at `stops` instead of at blanks.
    count
        Lines of this shape.
    """

    stops: tuple[int, ...]
    rooms: tuple[int, ...]
    styles: tuple[NumberStyle, ...]
    round_ends: list[bool]
    line_no: int
    line: bytes
    touching: bool = False
    count: int = 0


@dataclass(slots=True)
class _Group:
    """Lines that have something in common: how many, the first of them, their widest rooms."""

    line_no: int
    line: bytes
    rooms: tuple[int, ...]
    count: int = 0
    round_end: bool = False

    def add(self, form: LineForm, round_end: bool = False) -> None:
        if form.line_no < self.line_no:
            self.line_no, self.line = form.line_no, form.line
        self.rooms = tuple(max(pair) for pair in zip(self.rooms, form.rooms, strict=True))
        self.count += form.count
        self.round_end |= round_end


class LineTally:
    """Counts the forms of all lines of a file and refuses the odd ones at its end."""

    def __init__(self, file: str) -> None:
        self._file = file
        self._layouts: dict[tuple[bool, ...], dict[tuple[int, ...], _Group]] = {}
        self._styles: list[dict[NumberStyle, _Group]] = []

    def add(self, forms: Iterable[LineForm]) -> None:
        """Count these forms."""
        for form in forms:
            kinds = tuple(style.exponent != 0 for style in form.styles)
            layouts = self._layouts.setdefault(kinds, {})
            if len(layouts) <= _MOST_LAYOUTS:
                _group(layouts, form.stops, form).add(form)
            self._styles = self._styles or [{} for _ in form.styles]
            for seen, style, round_end in zip(
                self._styles, form.styles, form.round_ends, strict=True
            ):
                _group(seen, style, form).add(form, round_end)

    def vouches_for_last_line(self) -> bool:
        """Whether a last line without line end is whole: it looks like every line before it.

        Either all lines have the same right-aligned columns, or their last numbers the same
        fixed decimals.
        """
        if not self._styles:
            return False
        layouts = [group for by_stops in self._layouts.values() for group in by_stops.values()]
        if len(layouts) == 1 and layouts[0].count > 1 and max(layouts[0].rooms) > 1:
            return True
        (style, group), *others = self._styles[-1].items()
        return not others and style.decimals > 1 and group.round_end and group.count > 1

    def fixed_decimals(self) -> int | None:
        """Decimals of all numbers, or None with exponents or a varying number of decimals."""
        styles = {style for seen in self._styles for style in seen}
        if len(styles) != 1:
            return None
        style = styles.pop()
        return style.decimals if style.decimals > 1 and style.exponent == 0 else None

    def check(self) -> None:
        """Refuse lines that are odd among their like.

        Raises
        ------
        InputError
            Names the first odd line.
        """
        for layouts in self._layouts.values():
            self._check_columns(layouts)
        for seen in self._styles:
            plain = {style: seen[style] for style in seen if style.exponent == 0}
            scientific = {style: seen[style] for style in seen if style.exponent > 0}
            self._check_decimals(plain)
            self._check_decimals(scientific)
            self._check_few_exponents(plain, scientific)
            self._check_dropped_letters(seen)

    def _check_columns(self, layouts: dict[tuple[int, ...], _Group]) -> None:
        usual = max(layouts, key=lambda stops: layouts[stops].count)
        n_usual = layouts[usual].count
        n_odd = sum(group.count for group in layouts.values()) - n_usual
        regular = len(layouts) <= _MOST_LAYOUTS and _is_damage(n_odd, n_usual)
        if not regular or max(layouts[usual].rooms) < 2:
            return
        odd = [
            (group.line_no, stops)
            for stops, group in layouts.items()
            if not _pushed(stops, usual, group.rooms)
        ]
        if odd:
            line_no, stops = min(odd)
            raise InputError(
                self._file,
                line=line_no,
                found=f"columns ending at {_listed(stops)} in {quoted(layouts[stops].line)}",
                expected=f"columns ending at {_listed(usual)} as in the other lines",
                todo=_TODO,
            )

    def _check_decimals(self, seen: dict[NumberStyle, _Group]) -> None:
        """All numbers with, or all without exponent: one style if decimals are fixed."""
        fixed = [style for style in seen if style.decimals > 1 and seen[style].round_end]
        if not fixed:
            return
        usual = max(fixed, key=lambda style: seen[style].count)
        odd = [style for style in seen if style != usual]
        # List-directed output keeps the number of significant digits, not of decimals.
        full = min(style.decimals for style in seen) >= _FULL_PRECISION
        few = _is_damage(sum(seen[style].count for style in odd), seen[usual].count)
        if few or not full:
            self._refuse_first(odd, usual, seen)

    def _check_few_exponents(
        self, plain: dict[NumberStyle, _Group], scientific: dict[NumberStyle, _Group]
    ) -> None:
        """A few exponents among numbers of fixed decimals are damage, not G format."""
        if len(plain) != 1:
            return
        (usual, group), *_ = plain.items()
        n_odd = sum(few.count for few in scientific.values())
        fixed = group.round_end and 1 < usual.decimals < _FULL_PRECISION
        if fixed and _is_damage(n_odd, group.count):
            self._refuse_first(list(scientific), usual, scientific)

    def _check_dropped_letters(self, seen: dict[NumberStyle, _Group]) -> None:
        """Exponents without the letter E belong to the same mantissas as those with it."""
        usual = max(seen, key=lambda style: seen[style].count)
        decimals = {style.decimals for style in seen if style.exponent > 0}
        dropped = [style for style in seen if style.exponent < 0]
        odd = [style for style in dropped if style.decimals not in decimals]
        self._refuse_first(odd, usual, seen)

    def _refuse_first(
        self, odd: list[NumberStyle], usual: NumberStyle, seen: dict[NumberStyle, _Group]
    ) -> None:
        if odd:
            style = min(odd, key=lambda one: seen[one].line_no)
            raise InputError(
                self._file,
                line=seen[style].line_no,
                found=f"a number with {_described(style)} in {quoted(seen[style].line)}",
                expected=f"{_described(usual)} as in the other lines",
                todo=_TODO,
            )


def _described(style: NumberStyle) -> str:
    text = f"{style.decimals} decimals"
    return text + (f" and {abs(style.exponent)} digits of exponent" if style.exponent else "")


def _is_damage(n_odd: int, n_usual: int) -> bool:
    """Whether so few lines unlike the others are damage rather than a free layout."""
    n_lines = n_odd + n_usual
    return n_lines >= _FEWEST_LINES and n_odd <= max(1, n_lines // _FEW)


def _group(groups: dict, key: object, form: LineForm) -> _Group:  # type: ignore[type-arg]
    if key not in groups:
        groups[key] = _Group(form.line_no, form.line, form.rooms)
    group: _Group = groups[key]
    return group


def _pushed(stops: tuple[int, ...], usual: tuple[int, ...], rooms: tuple[int, ...]) -> bool:
    """Whether the columns are the usual ones, moved right only by words too wide for theirs."""
    shift = 0
    for stop, usual_stop, room in zip(stops, usual, rooms, strict=True):
        if stop - usual_stop < shift or (stop - usual_stop > shift and room > 1):
            return False
        shift = stop - usual_stop
    return True


def _listed(stops: tuple[int, ...]) -> str:
    return ", ".join(str(stop) for stop in stops)
