"""Verdicts for the terminal: a summary of one, a table of many; plain text with units."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from topovet.notation import ev, k_text, mev, nonzero_by_plane, one_line, z2_text
from topovet.report.classes import class_words
from topovet.report.diagnosis_words import diagnosis_line
from topovet.report.tipping_words import companion_line, tipping_line
from topovet.report.words import node_count, radius_note
from topovet.verdict.document import ParityEntry, Verdict

_HEADINGS = (
    "name",
    "formula",
    "space group",
    "filling",
    "z2",
    "z4",
    "class",
    "gap",
    "purity",
    "grade",
    "flags",
)
_WIDEST = 60
_RIGHT = {"filling", "z4", "gap", "purity"}
_TYPOGRAPHY = str.maketrans({"−": "-", "–": "-", "½": "1/2", "⅓": "1/3", "⅔": "2/3", "₂": "2"})


def verdict_lines(verdict: Verdict) -> str:
    """A compact summary of one verdict, about a dozen lines, each number with its unit."""
    rows = [
        ("verdict", f"{class_words(verdict).title} [{verdict.class_}]"),
        ("indices", _indices(verdict)),
        ("witnesses", f"{_witnesses(verdict)}; agreement: {verdict.agreement}"),
        ("filling", f"{verdict.electrons.filling} bands, from {verdict.electrons.source}"),
        ("gap", _gap(verdict)),
        *_nodes(verdict),
        ("residuals", _residuals(verdict)),
        ("radius", f"{mev(verdict.robustness.radius_meV)}, {radius_note(verdict)}"),
        *((("tipping", tipping),) if (tipping := tipping_line(verdict)) else ()),
        *((("spinless", spinless),) if (spinless := companion_line(verdict)) else ()),
        *([("measure", measure)] if (measure := _measurable(verdict)) else []),
        ("grade", "; ".join([verdict.confidence.grade, *verdict.confidence.reasons])),
    ]
    lines = [_title(verdict)]
    lines += [f"  {label:<10} {plain_text(value)}" for label, value in rows]
    lines += [
        f"  {flag.severity:<10} {flag.code}: {plain_text(flag.summary)}" for flag in verdict.flags
    ]
    cause = diagnosis_line(verdict)
    if cause:
        lines.append(f"  {'cause':<10} {plain_text(cause)}")
    return "\n".join(lines)


def verdict_table(verdicts: Iterable[Verdict]) -> str:
    """One aligned line per verdict; the gap is the smallest direct one that was met."""
    rows = [_HEADINGS, *(_row(v) for v in verdicts)]
    widths = [max(len(row[i]) for row in rows) for i in range(len(_HEADINGS))]
    lines = [_aligned(row, widths) for row in rows]
    lines.insert(1, "  ".join("-" * w for w in widths))
    return "\n".join(lines)


def _row(verdict: Verdict) -> tuple[str, ...]:
    group = verdict.case.space_group
    purity = _purity(verdict.witnesses.parity)
    cells = (
        verdict.case.name,
        verdict.case.formula,
        group.symbol if group is not None else "-",
        str(verdict.electrons.filling),
        z2_text(verdict.invariants.z2, plain=True),
        "-" if verdict.invariants.z4 is None else str(verdict.invariants.z4),
        verdict.class_,
        ev(verdict.gap.direct_eV),
        "-" if purity is None else f"{purity:.4f}",
        verdict.confidence.grade,
        _flag_codes(verdict),
    )
    return tuple(_shortened(plain_text(cell)) for cell in cells)


def _shortened(cell: str) -> str:
    return cell if len(cell) <= _WIDEST else cell[: _WIDEST - 3] + "..."


def _aligned(row: Sequence[str], widths: Sequence[int]) -> str:
    cells = (
        cell.rjust(width) if heading in _RIGHT else cell.ljust(width)
        for cell, width, heading in zip(row, widths, _HEADINGS, strict=True)
    )
    return "  ".join(cells).rstrip()


def _title(verdict: Verdict) -> str:
    case = verdict.case
    group = case.space_group
    place = f"space group {group.symbol} ({group.number})" if group else "space group unknown"
    spin = "with spin" if case.spinful else "without spin"
    return plain_text(
        f"{case.name}: {case.formula}, {place}, {case.dimension}D, "
        f"{case.num_wann} Wannier functions {spin}"
    )


def _indices(verdict: Verdict) -> str:
    z2, z4 = verdict.invariants.z2, verdict.invariants.z4
    parts = [f"Z2 = {z2_text(z2, plain=True)}" if z2 is not None else "Z2 not given"]
    if z4 is not None:
        parts.append(f"Z4 = {z4} about the centre {k_text(verdict.inversion.centre, plain=True)}")
    mirrors = verdict.invariants.mirror_chern
    if mirrors:
        shown = nonzero_by_plane(mirrors).replace("−", "-")
        none = f"0 on {len(mirrors)} plane{'' if len(mirrors) == 1 else 's'}"
        parts.append(f"mirror Chern numbers {shown or none}")
    return ", ".join(parts)


def _witnesses(verdict: Verdict) -> str:
    entries = (
        ("parity", verdict.witnesses.parity),
        ("Wilson", verdict.witnesses.wilson),
        ("surface", verdict.witnesses.surface),
    )
    said = []
    for name, entry in entries:
        reason = f" ({entry.reason.rstrip('.')})" if entry.status != "ok" and entry.reason else ""
        said.append(f"{name} {entry.status}{reason}")
    return ", ".join(said)


def _gap(verdict: Verdict) -> str:
    gap = verdict.gap
    if gap.direct_eV is None:
        return f"not computed; {gap.status}"
    proved = gap.direct_proved_min_eV
    bound = f"; direct proved > {ev(proved)}" if proved is not None else ", sampled, not proved"
    if gap.indirect_proved_min_eV is not None:
        bound += f", indirect > {ev(gap.indirect_proved_min_eV)}"
    where = k_text(gap.direct_k, plain=True)
    return (
        f"direct {_at_most(gap.direct_eV)} at k = {where}, indirect {ev(gap.indirect_eV)}; "
        f"{gap.status}{bound}"
    )


def _nodes(verdict: Verdict) -> list[tuple[str, str]]:
    """A line on the nodes, where any were looked for."""
    search = verdict.node_search
    if verdict.nodes is None or search is None:
        return []
    text = node_count(verdict)
    points = [n for n in verdict.nodes if n.kind != "line"]
    if points:
        nearest = min(points, key=lambda n: abs(n.from_fermi_eV))
        text += f", nearest at k = {k_text(nearest.k, plain=True)}, {ev(nearest.from_fermi_eV)}"
        text += " from the Fermi energy" if search.fermi == "given" else " from the Fermi level"
    if search.complete:
        elsewhere = mev(search.gap_elsewhere_meV)
        return [("nodes", f"{text}; elsewhere the gap is proved > {elsewhere}")]
    return [("nodes", f"{text}; maybe more: {search.reason}")]


def _at_most(value: float) -> str:
    words = ev(value)
    return words if words.startswith("<") else f"<= {words}"


def _measurable(verdict: Verdict) -> str:
    """What an experiment could look for, in one line; empty where nothing is computed."""
    numbers = verdict.measurable
    edge, point = numbers.get("edge"), numbers.get("dirac_point")
    if arcs := numbers.get("fermi_arcs"):
        return _arcs(arcs, numbers["surface"]["miller"])
    if edge and edge["conductance_e2_h"] is not None:
        speeds = [abs(c["velocity_m_s"]) for c in edge["crossings"]]
        found = f", edge velocity {max(speeds):.2g} m/s" if speeds else ""
        return f"{edge['kind']} edges, {edge['conductance_e2_h']} e2/h{found} (estimates)"
    if not point or point["exposure_meV"] is None:
        return ""
    if "energy_eV" not in point or "surface_band" not in numbers:
        return "Dirac point buried among bulk states"
    where = f"{mev(point['exposure_meV'])} from the bulk bands ({point['status']})"
    speed = numbers["surface_band"]["velocity_m_s"]
    return (
        f"Dirac point at {ev(point['energy_eV'])}, {where}, velocity {speed:.2g} m/s on the "
        f"{point['termination']} (estimates)"
    )


def _arcs(arcs: Mapping[str, Any], miller: Sequence[int]) -> str:
    ends = [p for p in arcs["projections"] if p["chirality_sum"]]
    counted = sum(p["chirality_counted"] is not None for p in arcs["projections"])
    said = {
        "agree": f"surface levels agree around {counted} of {len(arcs['projections'])}",
        "disagree": "surface levels disagree",
    }.get(arcs["status"], "not confirmed by surface levels")
    where = " ".join(map(str, miller))
    if not ends:
        return f"chiralities cancel on the surface ({where}): no Fermi arc is demanded; {said}"
    return f"Fermi arcs end at {len(ends)} projections on the surface ({where}); {said} (estimates)"


def _residuals(verdict: Verdict) -> str:
    inversion = verdict.inversion
    reversal = f"time reversal {mev(verdict.time_reversal.violation_meV)}"
    if inversion.violation_meV is None:
        return f"{reversal}, inversion not measured ({inversion.reason or 'no reason given'})"
    return f"{reversal}, inversion {mev(inversion.violation_meV)}"


def _flag_codes(verdict: Verdict) -> str:
    counts = Counter(flag.code for flag in verdict.flags)
    return " ".join(code if n == 1 else f"{code}*{n}" for code, n in counts.items()) or "none"


def _purity(parity: ParityEntry) -> float | None:
    return min((t.purity for t in parity.trim), default=None)


def plain_text(text: str) -> str:
    """One line of characters that any terminal has."""
    return one_line(text).translate(_TYPOGRAPHY)
