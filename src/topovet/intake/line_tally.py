"""Telling a damaged line from a free layout, by what the other lines of the file look like.

Two rules, both about files that are regular but for a few lines:

- *columns*: where right-aligned columns end at the same places in all lines but one, or but one
  in ten, the others are odd. Lines that a too wide number pushed to the right, as C and Python
  do where Fortran prints asterisks, are not.
- *decimals*: where the numbers of a column are written with a fixed number of decimals (some end
  in 0, which no format of varying length leaves standing), any other number is odd.

Numbers with and without exponent may be mixed in a column (Fortran's G format and list-directed
output); then they are compared with their like only. In layouts with single blanks no columns can
be told, and only the second rule applies.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field

from topovet.errors import InputError, quoted

_FEW = 10
"""One odd line in this many may be damage; more are a free layout."""
_FEWEST_LINES = 4
_FULL_PRECISION = 12
"""Decimals from which one more or less is no damage worth refusing: 1e-12 eV."""

_MOST_LAYOUTS = 4096
"""Beyond so many the file has no regular columns, and no more are remembered."""

_TODO = "mend that line, or write the file again"


@dataclass(slots=True)
class LineForm:
    """What is known about all lines of one shape.

    Attributes
    ----------
    stops
        Where each column ends.
    rooms
        Blanks before each word, less one for the sign where it carries none.
    decimals
        Of each number; None in exponent form.
    line_no, line
        The first line of this shape.
    touching
        Words touch: the line must be cut at `stops` instead of at blanks.
    count
        Lines of this shape.
    round_ends
        For each number, whether one of them ended in the digit 0.
    """

    stops: tuple[int, ...]
    rooms: tuple[int, ...]
    decimals: tuple[int | None, ...]
    line_no: int
    line: bytes
    touching: bool = False
    count: int = 0
    round_ends: list[bool] = field(default_factory=list)


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
        self._decimals: list[dict[int | None, _Group]] = []

    def add(self, forms: Iterable[LineForm]) -> None:
        """Count these forms, and forget them."""
        for form in forms:
            exponents = tuple(d is None for d in form.decimals)
            layouts = self._layouts.setdefault(exponents, {})
            if len(layouts) <= _MOST_LAYOUTS:
                _group(layouts, form.stops, form).add(form)
            self._decimals = self._decimals or [{} for _ in form.decimals]
            for seen, decimals, round_end in zip(
                self._decimals, form.decimals, form.round_ends, strict=True
            ):
                _group(seen, decimals, form).add(form, round_end)

    def vouches_for_last_line(self) -> bool:
        """Whether a last line without line end is whole: it looks like every line before it."""
        if not self._decimals:
            return False
        layouts = [item for by_stops in self._layouts.values() for item in by_stops.values()]
        alone = len(layouts) == 1 and layouts[0].count > 1 and max(layouts[0].rooms) > 1
        last_number = self._decimals[-1]
        fixed = None not in last_number and 0 not in last_number and len(last_number) == 1
        return alone or (fixed and next(iter(last_number.values())).count > 1)

    def fixed_decimals(self) -> int | None:
        """Decimals of all numbers, or None with exponents or a varying number of decimals."""
        found = {d for seen in self._decimals for d in seen}
        single = found.pop() if len(found) == 1 else None
        return single if single is not None and single > 1 else None

    def check(self) -> None:
        """Refuse lines that are odd among their like.

        Raises
        ------
        InputError
            Names the first odd line.
        """
        for layouts in self._layouts.values():
            self._check_columns(layouts)
        for seen in self._decimals:
            self._check_decimals(seen)

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

    def _check_decimals(self, seen: dict[int | None, _Group]) -> None:
        fixed = [d for d, group in seen.items() if d is not None and d > 1 and group.round_end]
        if not fixed:
            return
        usual = max(fixed, key=lambda d: seen[d].count)
        if None in seen and (len(seen) > 2 or not _is_damage(seen[None].count, seen[usual].count)):
            return
        odd = [
            (group.line_no, decimals)
            for decimals, group in seen.items()
            if decimals != usual and min(decimals or 0, usual) < _FULL_PRECISION
        ]
        if odd:
            line_no, decimals = min(odd, key=lambda item: item[0])
            shown = "an exponent" if decimals is None else f"{decimals} decimals"
            raise InputError(
                self._file,
                line=line_no,
                found=f"a number with {shown} in {quoted(seen[decimals].line)}",
                expected=f"{usual} decimals as in the other lines",
                todo=_TODO,
            )


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
