"""A shortlist from a folder of dossiers: scanned, ranked, filtered, written."""

from __future__ import annotations

import os
import tempfile
from contextlib import closing
from pathlib import Path
from urllib.parse import quote

import topovet
from topovet.pipeline.store import write_atomically
from topovet.report.shortlist.columns import csv_text, write_parquet
from topovet.report.shortlist.document import shortlist_json
from topovet.report.shortlist.html import render_shortlist
from topovet.report.shortlist.records import Ranked, Shortlist
from topovet.screening.index import Selection, build_index, save_index, select_ranks
from topovet.screening.merit import rule_table
from topovet.screening.merit_rules import MeritRules, default_rules
from topovet.screening.shortlist_ranking import rank
from topovet.screening.shortlist_scan import Scan, scan_dossiers

JSON, CSV, HTML = "shortlist.json", "shortlist.csv", "shortlist.html"
INDEX, PARQUET = "shortlist.sqlite", "shortlist.parquet"


def make_shortlist(
    root: Path,
    *,
    rules: MeritRules | None = None,
    selection: Selection | None = None,
    index_at: Path | None = None,
) -> Shortlist:
    """Rank all dossiers below a folder and keep those that pass the selection.

    Parameters
    ----------
    root
        Folder of dossiers, at any depth.
    rules
        Of the merit; the shipped ones where None.
    selection
        Filters; ranks are those of the whole list all the same.
    index_at
        Where to leave a copy of the SQLite index of the whole list; nowhere where None.

    Raises
    ------
    InputError
        There is no such folder, or no dossier in it.
    StoreError
        The index cannot be written.
    """
    rules, selection = rules or default_rules(), selection or Selection()
    found = scan_dossiers(root)
    ranked = rank(found.candidates, rules)
    with closing(build_index(ranked, found.failures)) as index:
        kept = set(select_ranks(index, selection))
        if index_at is not None:
            save_index(index, index_at)
    rows = tuple(row for row in ranked if row.rank in kept)
    return Shortlist(
        rows=rows,
        failures=found.failures,
        n_vetted=len(ranked),
        filters=selection_words(selection),
        notes=_notes(ranked, found, selection),
        rules=rule_table(rules),
        version=topovet.__version__,
    )


def write_shortlist(
    shortlist: Shortlist, root: Path, out: Path, *, parquet: bool = False
) -> tuple[Path, ...]:
    """Write page, JSON and CSV (and Parquet) into a folder, each whole or not at all.

    Parameters
    ----------
    shortlist
        What to write.
    root
        The folder that was searched: links of the page lead into it.
    out
        Folder to write to.
    parquet
        Whether to write Parquet too.

    Raises
    ------
    StoreError
        The place cannot be written.
    MissingLibraryError
        Parquet was asked for and pyarrow is not installed.
    """
    contents = {
        HTML: render_shortlist(shortlist, base=relative_link(root, out)).encode(),
        JSON: shortlist_json(shortlist).encode(),
        CSV: csv_text(shortlist).encode(),
    }
    if parquet:
        with tempfile.TemporaryDirectory() as folder:
            write_parquet(shortlist, Path(folder) / PARQUET)
            contents[PARQUET] = (Path(folder) / PARQUET).read_bytes()
    for name, data in contents.items():
        write_atomically(out / name, data)
    return tuple(out / name for name in contents)


def relative_link(root: Path, out: Path) -> str:
    """URL of the searched folder as seen from the page, ending in "/"."""
    way = os.path.relpath(root.resolve(), out.resolve())
    return quote(os.fsencode(Path(way).as_posix())) + "/"


def selection_words(selection: Selection) -> tuple[str, ...]:
    """The filters as they would be typed."""
    single = (
        ("grade", selection.grade),
        ("dimension", selection.dimension),
        ("min-gap", None if selection.min_gap_ev is None else f"{selection.min_gap_ev:g}"),
        ("name", selection.text),
    )
    many = (
        ("class", selection.classes),
        ("agreement", selection.agreements),
        ("element", selection.elements),
        ("without-element", selection.without_elements),
        ("flag", selection.flags),
        ("without-flag", selection.without_flags),
    )
    return (
        *(f"--{name} {value}" for name, values in many for value in values),
        *(f"--{name} {value}" for name, value in single if value is not None),
    )


def _notes(ranked: tuple[Ranked, ...], found: Scan, selection: Selection) -> tuple[str, ...]:
    """What a filter left out for want of knowledge, and verdicts that failures stand before."""
    notes = []
    unread = sum(row.candidate.elements is None for row in ranked)
    if unread and (selection.elements or selection.without_elements):
        notes.append(f"Formulas that cannot be read into elements: {unread}, left out.")
    if selection.min_gap_ev is not None:
        unknown = sum(
            row.candidate.gaps.direct_ev is None and row.candidate.gaps.indirect_ev is None
            for row in ranked
        )
        if unknown:
            notes.append(f"Cases without a computed gap: {unknown}, left out.")
    return tuple(notes)
