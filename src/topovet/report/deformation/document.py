"""deform.json: one way to write it, and the schema that says what it holds."""

from __future__ import annotations

import json
import math
from importlib import resources
from typing import Any

from topovet.deformation.results import Closing, ParityExchange, Segment, SideIndices
from topovet.report.deformation.material import DeformationMaterial, EndEntry
from topovet.report.json_document import plain_document

SCHEMA = "topovet.deform/1"


def deformation_json(material: DeformationMaterial) -> str:
    """The walk as JSON text, the same bytes for the same walk, ending in a line feed.

    Raises
    ------
    NonFiniteNumberError
        A number is not finite.
    """
    document = plain_document(deformation_document(material), "deform")
    return json.dumps(document, indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def load_deformation_schema() -> dict[str, Any]:
    """The JSON Schema (2020-12) of deform.json."""
    text = resources.files("topovet.report").joinpath("deform.schema.json").read_text("utf-8")
    schema: dict[str, Any] = json.loads(text)
    return schema


def deformation_document(material: DeformationMaterial) -> dict[str, Any]:
    """The walk as plain data; names of quantities end in their units."""
    made, conclusion = material.walk, material.conclusion
    return {
        "schema": SCHEMA,
        "a": _end(material.a),
        "b": _end(material.b),
        "electrons": {"filling": made.filling},
        "comparison": _comparison(material),
        "averaging": {
            "time_reversal": made.time_reversal,
            "inversion": made.inversion,
            "operations": made.averagings[0].n_operations,
            "moved_meV": [a.moved_mev for a in made.averagings],
            "levels_moved_meV": [a.levels_moved_mev for a in made.averagings],
        },
        "conclusion": {
            "outcome": conclusion.outcome,
            "proved": conclusion.proved,
            "sentence": conclusion.sentence,
            "changes": None
            if conclusion.changes is None
            else [
                {"index": c.index, "before": c.before, "after": c.after} for c in conclusion.changes
            ],
            "doubts": conclusion.doubts,
        },
        "gap": {
            "attained": [{"lambda": s.lam, "gap_eV": s.gap_ev, "k": s.k} for s in made.samples],
            "proved": [
                {"from": s.lo, "to": s.hi, "proved_min_eV": s.proved_min_ev} for s in made.stretches
            ],
            "proved_share": made.proved_share,
            "proved_throughout": made.proved_throughout,
            "resolution": made.resolution,
            "solves": made.n_solves,
            "note": made.proof_note,
        },
        "closings": [_closing(c) for c in made.closings],
        "exchanges": [_exchange(e) for e in made.exchanges],
        "exchange_note": made.exchange_note,
        "segments": [_segment(s) for s in made.segments],
        "provenance": {
            "version": material.version,
            "packages": material.packages,
            "settings": material.settings,
        },
    }


def _end(end: EndEntry) -> dict[str, Any]:
    return {
        "name": end.name,
        "formula": end.formula,
        "class": end.class_,
        "z2": end.z2,
        "grade": end.grade,
        "errors": end.errors,
        "inputs": [{"file": f, "sha256": digest, "bytes": size} for f, digest, size in end.files],
    }


def _comparison(material: DeformationMaterial) -> dict[str, Any]:
    found = material.walk.comparison
    return {
        "overlap": found.overlap,
        "function_overlaps": [None if math.isnan(o) else o for o in found.function_overlaps],
        "least_function": found.least_function + 1,
        "functions": found.functions,
        "r_common": found.n_common,
        "r_union": found.n_union,
        "stretches": found.stretches,
        "rotation_deg": found.rotation_deg,
        "displacement_ang": found.displacement_ang,
        "substitutions": found.substitutions,
        "spin_added": found.spin_added,
    }


def _closing(closing: Closing) -> dict[str, Any]:
    return {
        "kind": closing.kind,
        "lambda": closing.lam,
        "from": closing.lo,
        "to": closing.hi,
        "k": closing.k,
        "gap_eV": closing.gap_ev,
        "exchanges": [_exchange(e) for e in closing.exchanges],
    }


def _exchange(exchange: ParityExchange) -> dict[str, Any]:
    return {
        "lambda": exchange.lam,
        "k": exchange.k,
        "n_minus": [exchange.n_minus_before, exchange.n_minus_after],
        "energy_eV": exchange.energy_ev,
    }


def _segment(segment: Segment) -> dict[str, Any]:
    return {
        "from": segment.lo,
        "to": segment.hi,
        "proved_share": segment.proved_share,
        "consistent": segment.consistent,
        "sides": [_side(side) for side in segment.sides],
    }


def _side(side: SideIndices) -> dict[str, Any]:
    return {
        "lambda": side.lam,
        "z2": side.z2,
        "z4": side.z4,
        "eta4": side.eta4,
        "chern": side.chern,
        "witnesses": {"parity_z2": side.parity_z2, "wilson_z2": side.wilson_z2},
        "agreement": side.agreement,
        "notes": side.notes,
    }
