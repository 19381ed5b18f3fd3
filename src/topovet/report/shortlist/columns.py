"""The columns of a shortlist as a table: names with units, values, and what is text."""

from __future__ import annotations

import csv
import io
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from topovet.errors import TopovetError
from topovet.report.shortlist.records import Ranked, Shortlist

_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")
"""A spreadsheet takes a text cell that begins so for a formula and may run it."""


class MissingLibraryError(TopovetError):
    """A format needs a library that is not installed."""


@dataclass(frozen=True, slots=True)
class Column:
    """One column.

    Attributes
    ----------
    name
        Heading, with the unit at its end where there is one.
    kind
        "text", "integer" or "number".
    value
        From a row; None where there is no value.
    """

    name: str
    kind: str
    value: Callable[[Ranked], Any]


COLUMNS = (
    Column("rank", "integer", lambda r: r.rank),
    Column("tier", "text", lambda r: r.tier),
    Column("merit_points", "number", lambda r: r.merit),
    Column("name", "text", lambda r: r.candidate.name),
    Column("formula", "text", lambda r: r.candidate.formula),
    Column("space_group_number", "integer", lambda r: (r.candidate.space_group or (None,))[0]),
    Column(
        "space_group",
        "text",
        lambda r: None if r.candidate.space_group is None else r.candidate.space_group[1],
    ),
    Column("dimension", "integer", lambda r: r.candidate.dimension),
    Column("class", "text", lambda r: r.candidate.class_),
    Column("indices", "text", lambda r: r.candidate.indices or None),
    Column("agreement", "text", lambda r: r.candidate.agreement),
    Column("grade", "text", lambda r: r.candidate.grade),
    Column("gap_status", "text", lambda r: r.candidate.gaps.status),
    Column("gap_direct_sampled_eV", "number", lambda r: r.candidate.gaps.direct_ev),
    Column("gap_direct_proved_min_eV", "number", lambda r: r.candidate.gaps.proved_ev),
    Column("gap_indirect_sampled_eV", "number", lambda r: r.candidate.gaps.indirect_ev),
    Column("radius_meV", "number", lambda r: r.candidate.radius_mev),
    Column("known_errors_meV", "number", lambda r: r.candidate.error_mev),
    Column("tipping_meV", "number", lambda r: r.candidate.tipping_mev),
    Column("dirac_exposure_meV", "number", lambda r: r.candidate.exposure_mev),
    Column(
        "flags",
        "text",
        lambda r: " ".join(dict.fromkeys(f.code for f in r.candidate.flags)) or None,
    ),
    Column("reasons", "text", lambda r: " ".join(r.reasons)),
    Column("folder", "text", lambda r: r.candidate.folder),
)
"""In the order of the table; energies in eV or meV as the names say, merit in points."""


def csv_text(shortlist: Shortlist) -> str:
    """The rows as CSV (RFC 4180), UTF-8, the first line holding the names of the columns.

    Text that a spreadsheet would take for a formula gets a leading apostrophe.
    """
    out = io.StringIO(newline="")
    writer = csv.writer(out)
    writer.writerow([column.name for column in COLUMNS])
    for row in shortlist.rows:
        writer.writerow([_cell(column, row) for column in COLUMNS])
    return out.getvalue()


def _cell(column: Column, row: Ranked) -> str:
    value = column.value(row)
    if value is None:
        return ""
    if column.kind == "text":
        text = str(value)
        return f"'{text}" if text.startswith(_FORMULA_STARTS) else text
    return repr(value)


def write_parquet(shortlist: Shortlist, path: Path) -> None:
    """The rows as an Apache Parquet file.

    Raises
    ------
    MissingLibraryError
        pyarrow is not installed.
    """
    try:
        import pyarrow
        import pyarrow.parquet
    except ImportError as error:
        raise MissingLibraryError(
            "Parquet needs pyarrow, which is not installed; run pip install pyarrow, or use --csv."
        ) from error
    types = {"text": pyarrow.string(), "integer": pyarrow.int64(), "number": pyarrow.float64()}
    schema = pyarrow.schema([(column.name, types[column.kind]) for column in COLUMNS])
    data = {column.name: [column.value(row) for row in shortlist.rows] for column in COLUMNS}
    pyarrow.parquet.write_table(pyarrow.table(data, schema=schema), path)
