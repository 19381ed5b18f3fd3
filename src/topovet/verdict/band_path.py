"""How bands connect along the path, as the verdict's document has it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from topovet.invariants.band_reps.path_results import (
    EndLevel,
    LevelConnection,
    LevelCrossing,
    PathConnections,
    PathSegment,
)


def connections_entry(found: PathConnections | None) -> Mapping[str, Any] | None:
    """The entry beside the band representations; None where the path was not followed."""
    if found is None:
        return None
    return {"operations": found.n_operations, "segments": [_segment(s) for s in found.segments]}


def _segment(segment: PathSegment) -> Mapping[str, Any]:
    return {
        "from": segment.start,
        "to": segment.end,
        "k_from": list(segment.k_start),
        "k_to": list(segment.k_end),
        "symmetry": segment.symmetry,
        "levels": list(segment.kinds),
        "error_meV": segment.error_mev,
        "connections": [_connection(c) for c in segment.connections],
        "crossings": [_crossing(c) for c in segment.crossings],
    }


def _connection(connection: LevelConnection) -> Mapping[str, Any]:
    return {
        "level": connection.kind,
        "bands": connection.n_bands,
        "from": _end(connection.start),
        "to": _end(connection.end),
        "approach_meV": connection.approach_mev,
        "settled": connection.settled,
    }


def _end(level: EndLevel) -> Mapping[str, Any]:
    return {
        "level": level.label,
        "first_band": level.first_band,
        "bands": level.n_bands,
        "energy_eV": level.energy_ev,
    }


def _crossing(crossing: LevelCrossing) -> Mapping[str, Any]:
    return {
        "k": list(crossing.k_frac),
        "energy_eV": crossing.energy_ev,
        "first_band": crossing.first_band,
        "bands": crossing.n_bands,
        "levels": list(crossing.kinds),
        "place": crossing.place,
        "splitting_meV": crossing.splitting_mev,
    }
