"""The shortlist as a table for the terminal."""

from __future__ import annotations

import sys
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

from rich.console import Console
from rich.table import Table
from rich.text import Text

from topovet.notation import mev_number, one_line
from topovet.report.shortlist.html import counted, grouped
from topovet.report.shortlist.records import Ranked, Shortlist
from topovet.units import MEV_PER_EV
from topovet.verdict.flags import SEVERITIES

_PIPE_WIDTH = 400
"""Columns where stdout is no terminal: wide enough that nothing is cut."""

_WIDE = 150
"""Columns from which a terminal gets the whole table."""

_ELASTIC, _SHRUNK = ("name", "flags"), 8
"""Columns that give way on a narrow terminal, and how far."""

_LONGEST = 60
_TYPOGRAPHY = str.maketrans({"−": "-", "–": "-"})


@dataclass(frozen=True, slots=True)
class _Column:
    """A column: heading with its unit, alignment, cell, and whether a narrow table has it."""

    heading: str
    justify: Literal["left", "center", "right"]
    cell: Callable[[Ranked], str]
    narrow: bool = True
    wide: bool = True


def _mev(value_ev: float | None) -> str:
    return mev_number(None if value_ev is None else value_ev * MEV_PER_EV)


def _symbol(row: Ranked) -> str:
    return "-" if row.candidate.space_group is None else row.candidate.space_group[1]


def _flag_codes(row: Ranked) -> str:
    """Codes of the flags, those of severity error with a mark of their own."""
    counts = Counter(f.code + ("!" if f.severity == "error" else "") for f in row.candidate.flags)
    return " ".join(code if n == 1 else f"{code}*{n}" for code, n in counts.items()) or "none"


def _flag_counts(row: Ranked) -> str:
    counts = Counter(f.severity for f in row.candidate.flags)
    said = [f"{counts[s]} {s}" for s in reversed(SEVERITIES) if counts[s]]
    return ", ".join(said) or "none"


_COLUMNS = (
    _Column("rank", "right", lambda r: str(r.rank)),
    _Column("merit\npoints", "right", lambda r: "-" if r.merit is None else f"{r.merit:.1f}"),
    _Column("name", "left", lambda r: r.candidate.name),
    _Column("formula", "left", lambda r: r.candidate.formula, narrow=False),
    _Column("space\ngroup", "left", _symbol, narrow=False),
    _Column("class", "left", lambda r: r.candidate.class_),
    _Column("indices", "left", lambda r: r.candidate.indices or "-"),
    _Column("witnesses", "left", lambda r: r.candidate.agreement, narrow=False),
    _Column("grade", "center", lambda r: r.candidate.grade),
    _Column("direct gap\nmeV, at most", "right", lambda r: _mev(r.candidate.gaps.direct_ev)),
    _Column("indirect gap\nmeV", "right", lambda r: _mev(r.candidate.gaps.indirect_ev)),
    _Column("radius\nmeV", "right", lambda r: mev_number(r.candidate.radius_mev), narrow=False),
    _Column("flags", "left", _flag_codes, narrow=False),
    _Column("flags", "left", _flag_counts, wide=False),
)


def print_table(shortlist: Shortlist, *, limit: int | None = None) -> None:
    """Print the rows on stdout, then how many there are of which kind."""
    console = Console(width=None if sys.stdout.isatty() else _PIPE_WIDTH, highlight=False)
    shown = shortlist.rows[:limit]
    if shown:
        console.print(_table(shown, wide=console.width >= _WIDE))
    hidden = len(shortlist.rows) - len(shown)
    more = f" ({grouped(hidden)} more not shown)" if hidden else ""
    kept = f" of {grouped(shortlist.n_vetted)} vetted" if shortlist.filters else ""
    plural = "" if len(shortlist.rows) == 1 else "s"
    summary = f"{grouped(len(shortlist.rows))} case{plural}{kept}: {counted(shortlist)}{more}"
    for line in (summary, *shortlist.notes):
        console.print(Text(line))


def _table(rows: tuple[Ranked, ...], *, wide: bool) -> Table:
    """Cells are `Text`, so that no name is taken for markup."""
    columns = [column for column in _COLUMNS if (column.wide if wide else column.narrow)]
    table = Table(box=None, pad_edge=False, header_style="bold", padding=(0, 1))
    cells = [[_shortened(column.cell(row)) for row in rows] for column in columns]
    for column, found in zip(columns, cells, strict=True):
        least = max(map(len, (*column.heading.split("\n"), *found)))
        table.add_column(
            column.heading,
            justify=column.justify,
            no_wrap=True,
            min_width=_SHRUNK if column.heading in _ELASTIC else least,
        )
    for line in zip(*cells, strict=True):
        table.add_row(*map(Text, line))
    return table


def _shortened(cell: str) -> str:
    text = one_line(cell).translate(_TYPOGRAPHY)
    return text if len(text) <= _LONGEST else text[: _LONGEST - 3] + "..."
