"""shortlist.json: one way to write it; the schema is `topovet/report/shortlist.schema.json`."""

from __future__ import annotations

import json
from dataclasses import asdict
from importlib import resources
from typing import Any

from topovet.report.shortlist.records import (
    SCHEMA,
    TIERS,
    Candidate,
    Failure,
    Ranked,
    Shortlist,
    plain_parts,
)


def shortlist_json(shortlist: Shortlist) -> str:
    """The shortlist as JSON text, the same bytes for the same list, ending in a line feed."""
    document = shortlist_document(shortlist)
    return json.dumps(document, indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def load_shortlist_schema() -> dict[str, Any]:
    """The JSON Schema (2020-12) of shortlist.json."""
    text = resources.files("topovet.report").joinpath("shortlist.schema.json").read_text("utf-8")
    schema: dict[str, Any] = json.loads(text)
    return schema


def shortlist_document(shortlist: Shortlist) -> dict[str, Any]:
    """The shortlist as plain dictionaries and lists."""
    return {
        "schema": SCHEMA,
        "version": shortlist.version,
        "merit": {
            "source": shortlist.rules.source,
            "rules": {name: dict(table) for name, table in shortlist.rules.values.items()},
        },
        "filters": list(shortlist.filters),
        "notes": list(shortlist.notes),
        "counts": {
            "vetted": shortlist.n_vetted,
            "listed": len(shortlist.rows),
            "failed": len(shortlist.failures),
            **{tier: shortlist.count(tier) for tier in TIERS},
        },
        "rows": [_row(row) for row in shortlist.rows],
        "failures": [_failure(failure) for failure in shortlist.failures],
    }


def _row(row: Ranked) -> dict[str, Any]:
    return {
        "rank": row.rank,
        "tier": row.tier,
        "merit_points": row.merit,
        "parts": plain_parts(row),
        "reasons": list(row.reasons),
        **_candidate(row.candidate),
    }


def _candidate(c: Candidate) -> dict[str, Any]:
    group = c.space_group
    return {
        "name": c.name,
        "formula": c.formula,
        "elements": None if c.elements is None else list(c.elements),
        "space_group": None if group is None else {"number": group[0], "symbol": group[1]},
        "dimension": c.dimension,
        "class": c.class_,
        "title": c.title,
        "indices": c.indices or None,
        "agreement": c.agreement,
        "grade": c.grade,
        "gap": {
            "status": c.gaps.status,
            "direct_eV": c.gaps.direct_ev,
            "direct_proved_min_eV": c.gaps.proved_ev,
            "indirect_eV": c.gaps.indirect_ev,
        },
        "radius_meV": c.radius_mev,
        "error_meV": c.error_mev,
        "tipping_meV": c.tipping_mev,
        "exposure_meV": c.exposure_mev,
        "obstacle": c.obstacle,
        "flags": [asdict(flag) for flag in c.flags],
        "witnesses": [asdict(witness) for witness in c.witnesses],
        "diagnosis": {
            "asked_because": c.asked_because,
            "causes": [asdict(cause) for cause in c.causes],
        },
        "folder": c.folder,
        "link": c.link,
        "has_report": c.has_report,
    }


def _failure(failure: Failure) -> dict[str, Any]:
    return asdict(failure)
