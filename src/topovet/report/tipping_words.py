"""Tipping points in words: the nearest in one line, and what the numbers leave out."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from topovet.notation import mev
from topovet.verdict.document import Verdict

NEAR_MEV = 100.0
"""Shifts below this are called near (practice: errors of semilocal functionals in the distance of
levels are tenths of an eV); the grade does not depend on it."""


def tipping_line(verdict: Verdict) -> str:
    """The nearest shift and the nearest scale at which something happens; "" without a search."""
    entries = verdict.robustness.tipping
    if not entries:
        return ""
    shifts = [e for e in entries if e["parameter"] == "on-site shift"]
    scales = [e for e in entries if e["parameter"] != "on-site shift"]
    found = [str(kind[0]["sentence"]) for kind in (shifts, scales) if _happens(kind)]
    if found:
        return "; ".join(found)
    return "; ".join(str(entry["sentence"]) for entry in entries)


def companion_line(verdict: Verdict) -> str:
    """Whether the spinless companion was used, and how far it is from the built-in part; or ""."""
    entry = verdict.robustness.companion
    if entry is None:
        return ""
    if not entry["used"]:
        instead = any(t["spin_orbit_from"] for t in verdict.robustness.tipping)
        then = "; the spin-dependent part of H is scaled instead" if instead else ""
        return f"companion not used, because {entry['reason']}{then}"
    overlap = entry["least_overlap"]
    alike = "" if overlap is None else f"; hoppings overlap by {overlap:.3f} or more"
    return (
        f"at a spin–orbit scale of 0 H is the spinless companion {entry['file']}, which differs by "
        f"up to {mev(entry['difference_meV'])} from H without its spin-dependent part (sampled k; "
        f"zero of energy {mev(abs(entry['offset_meV']))} apart and left out{alike})"
    )


def _happens(entries: Sequence[Mapping[str, Any]]) -> bool:
    return bool(entries) and entries[0]["outcome"] not in ("holds", "open")


def nearest_mev(verdict: Verdict) -> float | None:
    """Distance to the nearest tipping point that is a shift, meV."""
    found = [e["distance_meV"] for e in verdict.robustness.tipping]
    return min((float(d) for d in found if d is not None), default=None)
