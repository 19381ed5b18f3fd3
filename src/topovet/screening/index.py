"""An SQLite index of a shortlist: filters ask it, and a copy of it is left for other programs.

The index is a cache. It is built anew from the dossiers each time and never read back, so that
nothing in it can go stale; the copy on disk is replaced in one step.
"""

from __future__ import annotations

import sqlite3
import tempfile
from collections.abc import Iterable, Sequence
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path

from topovet.pipeline.store import write_atomically
from topovet.report.shortlist.records import Failure, Ranked
from topovet.screening.merit import cautioned_elements, limiting_gap

_TABLES = """
CREATE TABLE candidates (
  rank INTEGER PRIMARY KEY, tier TEXT NOT NULL, merit_points REAL, folder TEXT NOT NULL,
  name TEXT NOT NULL, formula TEXT NOT NULL, formula_read INTEGER NOT NULL,
  space_group INTEGER, symbol TEXT, dimension INTEGER NOT NULL, class TEXT NOT NULL,
  indices TEXT NOT NULL, agreement TEXT NOT NULL, grade TEXT NOT NULL, gap_status TEXT NOT NULL,
  gap_direct_eV REAL, gap_direct_proved_min_eV REAL, gap_indirect_eV REAL, gap_limiting_eV REAL,
  radius_meV REAL, error_meV REAL, tipping_meV REAL, exposure_meV REAL, obstacle TEXT NOT NULL);
CREATE TABLE elements (rank INTEGER NOT NULL, symbol TEXT NOT NULL, caution INTEGER NOT NULL);
CREATE TABLE flags (
  rank INTEGER NOT NULL, code TEXT NOT NULL, severity TEXT NOT NULL, summary TEXT NOT NULL);
CREATE TABLE causes (
  rank INTEGER NOT NULL, cause TEXT NOT NULL, answer TEXT NOT NULL, weight REAL NOT NULL,
  finding TEXT NOT NULL, advice TEXT NOT NULL);
CREATE TABLE parts (
  rank INTEGER NOT NULL, part TEXT NOT NULL, value REAL, points REAL NOT NULL, weight REAL NOT NULL,
  why TEXT NOT NULL);
CREATE TABLE failures (
  kind TEXT NOT NULL, name TEXT NOT NULL, folder TEXT NOT NULL, file TEXT NOT NULL, line INTEGER,
  message TEXT NOT NULL, time TEXT NOT NULL);
CREATE INDEX elements_by_symbol ON elements (symbol, rank);
CREATE INDEX flags_by_code ON flags (code, rank);
"""


@dataclass(frozen=True, slots=True)
class Selection:
    """What a shortlist is narrowed to; the empty selection takes everything.

    Attributes
    ----------
    classes
        One of these classes.
    grade
        This grade or a better one.
    agreements
        One of these.
    dimension
        2 or 3.
    min_gap_ev
        The limiting gap (see `topovet.screening.merit.limiting_gap`) is at least this, eV.
    elements, without_elements
        All of these, none of these. A formula that cannot be read passes neither.
    flags, without_flags
        All of these codes, none of these.
    text
        In the name, whatever the case of its letters.
    """

    classes: tuple[str, ...] = ()
    grade: str | None = None
    agreements: tuple[str, ...] = ()
    dimension: int | None = None
    min_gap_ev: float | None = None
    elements: tuple[str, ...] = ()
    without_elements: tuple[str, ...] = ()
    flags: tuple[str, ...] = ()
    without_flags: tuple[str, ...] = ()
    text: str | None = None


def build_index(rows: Iterable[Ranked], failures: Iterable[Failure]) -> sqlite3.Connection:
    """The index of ranked cases and failures, in memory."""
    index = sqlite3.connect(":memory:")
    # SQLite's own lower() knows ASCII alone
    index.create_function("casefolded", 1, str.casefold, deterministic=True)
    index.executescript(_TABLES)
    for row in rows:
        _insert(index, "candidates", [_candidate_row(row)])
        _insert(index, "elements", _element_rows(row))
        _insert(
            index,
            "flags",
            [(row.rank, f.code, f.severity, f.summary) for f in row.candidate.flags],
        )
        _insert(
            index,
            "causes",
            [
                (row.rank, c.cause, c.answer, c.weight, c.finding, c.advice)
                for c in row.candidate.causes
            ],
        )
        _insert(
            index,
            "parts",
            [(row.rank, p.name, p.value, p.points, p.weight, p.words) for p in row.parts],
        )
    _insert(
        index,
        "failures",
        [(f.kind, f.name, f.folder, f.file, f.line, f.message, f.when) for f in failures],
    )
    index.commit()
    return index


def select_ranks(index: sqlite3.Connection, selection: Selection) -> tuple[int, ...]:
    """Ranks of the cases that pass, ascending."""
    conditions, values = _conditions(selection)
    where = " AND ".join(conditions) or "1"
    query = f"SELECT rank FROM candidates WHERE {where} ORDER BY rank"
    return tuple(rank for (rank,) in index.execute(query, values))


def save_index(index: sqlite3.Connection, path: Path) -> None:
    """Leave a copy of the index on disk, whole or not at all.

    Raises
    ------
    StoreError
        The place cannot be written.
    """
    with tempfile.TemporaryDirectory() as folder:
        copy = Path(folder) / "index"
        with closing(sqlite3.connect(copy)) as target:
            index.backup(target)
        write_atomically(path, copy.read_bytes())


def _conditions(selection: Selection) -> tuple[list[str], list[object]]:
    """SQL conditions and the values of their placeholders, in step."""
    conditions: list[str] = []
    values: list[object] = []

    def add(condition: str, *given: object) -> None:
        conditions.append(condition)
        values.extend(given)

    if selection.classes:
        add(f"class IN ({_marks(selection.classes)})", *selection.classes)
    if selection.agreements:
        add(f"agreement IN ({_marks(selection.agreements)})", *selection.agreements)
    if selection.grade is not None:
        add("grade <= ?", selection.grade)
    if selection.dimension is not None:
        add("dimension = ?", selection.dimension)
    if selection.min_gap_ev is not None:
        add("gap_limiting_eV >= ?", selection.min_gap_ev)
    if selection.text is not None:
        add("instr(casefolded(name), casefolded(?)) > 0", selection.text)
    if selection.elements or selection.without_elements:
        add("formula_read = 1")
    for table, column, wanted, unwanted in (
        ("elements", "symbol", selection.elements, selection.without_elements),
        ("flags", "code", selection.flags, selection.without_flags),
    ):
        for given, word in ((wanted, "IN"), (unwanted, "NOT IN")):
            for value in given:
                add(f"rank {word} (SELECT rank FROM {table} WHERE {column} = ?)", value)
    return conditions, values


def _marks(values: Sequence[object]) -> str:
    return ", ".join("?" for _ in values)


def _insert(index: sqlite3.Connection, table: str, rows: Sequence[Sequence[object]]) -> None:
    if rows:
        index.executemany(f"INSERT INTO {table} VALUES ({_marks(rows[0])})", rows)


def _candidate_row(row: Ranked) -> tuple[object, ...]:
    c, gap = row.candidate, limiting_gap(row.candidate)
    number, symbol = c.space_group or (None, None)
    return (
        *(row.rank, row.tier, row.merit, c.folder, c.name, c.formula, c.elements is not None),
        *(number, symbol, c.dimension, c.class_, c.indices, c.agreement, c.grade, c.gaps.status),
        *(c.gaps.direct_ev, c.gaps.proved_ev, c.gaps.indirect_ev),
        *(None if gap is None else gap[0] / 1000.0, c.radius_mev, c.error_mev),
        *(c.tipping_mev, c.exposure_mev, c.obstacle),
    )


def _element_rows(row: Ranked) -> list[tuple[object, ...]]:
    cautioned = cautioned_elements(row.candidate)
    return [(row.rank, s, s in cautioned) for s in row.candidate.elements or ()]
