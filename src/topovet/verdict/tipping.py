"""Tipping points as the verdict states them: one entry each, with a sentence."""

from __future__ import annotations

from typing import Any

from topovet.invariants.tipping.results import BY_COMPANION, BY_GAP, SCALE, TippingPoint
from topovet.notation import nonzero_by_plane, significant, z2_text
from topovet.verdict.conclude import Conclusion
from topovet.verdict.findings import Findings


def tipping_entries(findings: Findings, conclusion: Conclusion) -> tuple[dict[str, Any], ...]:
    """Entries of `robustness.tipping`, the nearest shift first, then the scale.

    Empty where the verdict stands behind no indices, or behind others than the search started
    from: there is nothing that could flip.
    """
    search, z2 = findings.tipping, conclusion.invariants.z2
    if search is None or z2 is None:
        return ()
    points = [p for p in search.points if p.z2_before == z2]
    return tuple(_entry(p, search.scale_from) for p in sorted(points, key=_nearest))


def companion_entry(findings: Findings) -> dict[str, Any] | None:
    """`robustness.companion`: the run without spin-orbit coupling, and whether it was used."""
    test, search = findings.companion, findings.tipping
    if test is None:
        return None
    used = test.fits and search is not None and search.scale_from == BY_COMPANION
    reason = test.reason
    if test.fits and not used:
        reason = "no tipping points were looked for"
    return {
        "file": test.name,
        "used": used,
        "reason": reason,
        "least_overlap": test.least_overlap,
        "difference_meV": test.difference_mev,
        "offset_meV": test.offset_mev,
        "inversion_violation_meV": test.inversion_mev,
    }


def _nearest(point: TippingPoint) -> tuple[bool, float]:
    begin = 1.0 if point.parameter == SCALE else 0.0
    far = float("inf") if point.critical is None else abs(point.critical - begin)
    return point.parameter == SCALE, far


def _entry(point: TippingPoint, scale_from: str) -> dict[str, Any]:
    scale = point.parameter == SCALE
    places: dict[str, Any] = {"trim": point.k} if point.method != BY_GAP else {"k": point.k}
    mirror = point.mirror_after
    return {
        "parameter": point.parameter,
        "group": None if scale else point.group,
        "against": None if scale else point.against,
        "direction": point.direction,
        "outcome": point.outcome,
        "critical_scale" if scale else "critical_eV": point.critical,
        "distance_meV": point.distance_mev,
        "searched_to": point.searched_to,
        **places,
        "states_exchanged": point.n_exchanged,
        "z2_before": point.z2_before,
        "z2_after": point.z2_after,
        "z4_before": point.z4_before,
        "z4_after": point.z4_after,
        "mirror_chern_after": None if mirror is None else dict(mirror),
        "class_after": class_after(point),
        "gap_on_the_way_eV": point.gap_on_the_way_ev,
        "gap_on_the_way_k": point.gap_on_the_way_k,
        "may_close_before": point.may_close_before,
        "spread": point.spread,
        "spin_orbit_from": scale_from if scale else None,
        "method": point.method,
        "sentence": sentence(point),
        "note": point.note,
    }


def class_after(point: TippingPoint) -> str | None:
    """Class beyond the tipping point where the indices that were counted settle it."""
    z2, mirror = point.z2_after, point.mirror_after
    if z2 is None:
        return None
    if any(z2):
        return "strong-ti" if z2[0] else "weak-ti"
    return "crystalline-ti" if mirror and any(number for _, number in mirror) else None


def sentence(point: TippingPoint) -> str:
    """What happens and when, in one clause: "flips to 0;(000) if Se p moves by −0.35 eV"."""
    if point.critical is None:
        return _nothing(point)
    when = f"if {_moved(point, point.critical)}"
    z2 = z2_text(point.z2_after)
    if point.outcome == "closes" and point.method != BY_GAP:
        return f"{z2_text(point.z2_before)} lasts until {_moved(point, 0.0)}, where the gap closes"
    if point.outcome == "closes":
        return f"the direct gap closes {when}; what follows has no gap again nearby"
    if point.method == BY_GAP:
        then = "is still" if point.outcome == "reopens" else "is"
        return f"the direct gap closes {when}, and Z₂ {then} {z2} at {_value(point)}"
    if point.outcome == "flips":
        return f"{_flip(point)} {when}"
    exchange = f"states of opposite parity change places at {_trims(point)} {when}"
    if point.outcome == "reopens":
        return f"{exchange}; Z₂, Z₄ and the mirror Chern numbers that were counted stay"
    others = "Z₂ and Z₄ stay" if len(point.z2_before or ()) > 1 else "Z₂ stays"
    return f"{exchange}; {others}, mirror Chern numbers were not counted"


def _flip(point: TippingPoint) -> str:
    if point.z2_after != point.z2_before:
        return f"flips to {z2_text(point.z2_after)}"
    if point.z4_after != point.z4_before:
        return f"flips to Z₄ = {point.z4_after} (Z₂ stays {z2_text(point.z2_after)})"
    numbers = nonzero_by_plane(dict(point.mirror_after or ())) or "all 0"
    return f"flips to mirror Chern numbers {numbers} (Z₂ stays {z2_text(point.z2_after)})"


def _nothing(point: TippingPoint) -> str:
    end = _moved(point, point.searched_to)
    if point.outcome == "holds":
        if point.method == BY_GAP:
            still = z2_text(point.z2_before)
            return f"the sampled gap stays open until {end}, and Z₂ is still {still} there"
        return f"no flip until {end}"
    return f"no flip until {end}; beyond this it is not settled"


def _moved(point: TippingPoint, value: float) -> str:
    if point.parameter == SCALE:
        return f"spin–orbit coupling is scaled by {_factor(value)}"
    against = f" against {point.against}" if point.against else ""
    return f"{point.group} moves by {_shift(value)}{against}"


def _value(point: TippingPoint) -> str:
    """The parameter at the point where indices were counted beyond a closing."""
    scale = point.parameter == SCALE
    return f"a scale of {_factor(point.searched_to)}" if scale else _shift(point.searched_to)


def _shift(value: float) -> str:
    """A shift with its sign: three digits, and no more than tenths of a meV."""
    digits = f"{abs(value):.3f}" if abs(value) >= 0.1 else f"{abs(value):.4f}"
    return f"{'+' if value > 0 else '−'}{digits} eV"


def _factor(value: float) -> str:
    if value in (0.0, 1.0, 2.0):
        return f"{value:.0f}"
    return significant(value, 4) if 0.9 < value < 1.1 else significant(value)


def _trims(point: TippingPoint) -> str:
    n = len(point.k)
    return "one TRIM" if n == 1 else f"{n} TRIM"
