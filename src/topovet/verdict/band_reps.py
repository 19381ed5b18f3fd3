"""Band representations as the verdict's document has them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from topovet.invariants.band_reps.results import AtomicLimit, BandRepWitness, BandSet, LineLevels
from topovet.verdict.allowed import allowed_entry
from topovet.verdict.band_path import connections_entry
from topovet.verdict.document import BandRepresentationsEntry
from topovet.verdict.findings import Findings


def band_representations_entry(
    findings: Findings, z2: tuple[int, ...] | None = None
) -> BandRepresentationsEntry:
    """The entry among the witnesses; z2 are the indices that they agree on."""
    return replace(_against_limits(findings), allowed=allowed_entry(findings, z2))


def _against_limits(findings: Findings) -> BandRepresentationsEntry:
    found = findings.band_reps
    if found is None:
        reason = findings.missing.get("band-representations", "not tested")
        return BandRepresentationsEntry(
            "not-applicable", reason, connections=connections_entry(findings.connections)
        )
    occupied = found.occupied
    return BandRepresentationsEntry(
        status=found.status,
        reason=found.reason,
        group=found.group,
        indicator_group=found.indicator_group,
        indicator=occupied.indicator,
        classification=occupied.classification,
        atomic_limits=tuple(_limit(limit) for limit in occupied.atomic_limits),
        obstructed=occupied.obstructed,
        crossings=occupied.crossings,
        z2_partial=occupied.z2 if any(v is not None for v in occupied.z2) else None,
        multiplicities=_multiplicities(found, occupied),
        lines=tuple(_line(line) for line in found.lines),
        isolated_sets=tuple(_band_set(entry, _proved(findings)) for entry in found.sets),
        connections=connections_entry(findings.connections),
    )


def _limit(limit: AtomicLimit) -> Mapping[str, Any]:
    return {
        "site": list(limit.site),
        "sites_per_cell": limit.n_sites,
        "site_symmetry": limit.site_symmetry,
        "orbital": limit.orbital,
        "bands": limit.n_bands,
        "copies": limit.copies,
        "on_atoms": limit.on_atoms,
    }


def _multiplicities(found: BandRepWitness, bands: BandSet) -> tuple[Mapping[str, Any], ...]:
    """Levels that occur, point by point."""
    return tuple(
        {
            "point": point.name,
            "k": list(point.k_frac),
            "levels": {label: n for label, n in zip(point.labels, counts, strict=True) if n},
        }
        for point, counts in zip(found.points, bands.multiplicities, strict=False)
    )


def _line(line: LineLevels) -> Mapping[str, Any]:
    return {
        "from": line.start,
        "to": line.end,
        "k_from": list(line.k_start),
        "k_to": list(line.k_end),
        "symmetry": line.symmetry,
        "levels": dict(zip(line.levels, line.counts, strict=True)),
    }


def _proved(findings: Findings) -> set[int]:
    """Numbers of bands that end at a proved gap, or at none."""
    lower = () if findings.lower is None else findings.lower.groups
    proved = {0} | {group.filling for group in lower if group.proved_min_ev is not None}
    if findings.electrons is not None and findings.gap_bound_mev is not None:
        proved.add(findings.electrons.filling)
    return proved


def _band_set(bands: BandSet, proved: set[int]) -> Mapping[str, Any]:
    edges = {bands.first_band, bands.first_band + bands.n_bands}
    return {
        "first_band": bands.first_band,
        "bands": bands.n_bands,
        "classification": bands.classification,
        "reason": bands.reason,
        "indicator": bands.indicator,
        "z2_partial": bands.z2 if any(v is not None for v in bands.z2) else None,
        "obstructed": bands.obstructed,
        "gaps_proved": edges <= proved,
    }
