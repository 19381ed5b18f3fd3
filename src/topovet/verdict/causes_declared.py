"""Causes that lie in what is declared and counted: orbitals, centre, electrons."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from topovet.diagnosis.results import Rereading
from topovet.notation import mev
from topovet.verdict import criteria
from topovet.verdict.inquiry import Cause, Inquiry

CLEAR_GAP_EV = 0.02
"""Gap that another filling must have to be taken for the right one (kT at room temperature)."""

CLEARER = 10.0
"""And the factor by which it must exceed the gap at the stated filling; if bands only touch there,
its typical gap must do so too. Inside a group of bands that belong together gaps are small
everywhere, at a transition or a node they close in one place."""


def declared_causes(inquiry: Inquiry) -> Iterator[Cause]:
    """Declaration, centre, filling, Fermi energy."""
    yield from _declaration(inquiry)
    yield from _centre(inquiry)
    yield _filling(inquiry)
    yield from _fermi(inquiry)


def _declaration(inquiry: Inquiry) -> Iterator[Cause]:
    findings, code = inquiry.findings, "orbital-declaration-wrong"
    flag, check = inquiry.flag(code), findings.declaration
    test = (
        "inversion is built from the declared orbitals, inferred from the Hamiltonian itself, and "
        "built from other orders, sites and parities of the declared orbitals."
    )
    if flag is not None:
        reading, finding, answer = inquiry.reading("declaration"), flag.summary, "yes"
        if reading is not None and reading.parity is not None and reading.parity.status != "ok":
            finding += " Parities cannot be read with it either."
            answer = "open"
        yield Cause(code, answer, test, finding, flag.evidence, flag.advice, reading)
    elif broken := _operations_of_bands_alone(inquiry):
        finding, evidence = broken
        advice = "Check order, kind and home cells of the projections against the run."
        yield Cause(code, "open", test, finding, evidence, advice)
    elif check is not None:
        inferred = check.inferred
        said = inferred.reason or f"holds to {mev(check.inferred_fit.worst_mev)}"
        finding = f"no other reading holds much better; inferred inversion: {said}."
        yield Cause(code, "no", test, finding, {})
    elif findings.inversion.basis == "declared":
        finding = f"declared inversion holds to {mev(findings.inversion.violation_r_mev)}."
        yield Cause(code, "no", test, finding, {})


def _operations_of_bands_alone(inquiry: Inquiry) -> tuple[str, dict[str, Any]] | None:
    """Where witnesses disagree: operations that bands have and declared functions grossly break.

    Localisation breaks rotations too, but by less than the gap in practice.
    """
    group, gap_mev = inquiry.findings.group, inquiry.findings.direct_gap_mev
    if group is None or gap_mev is None or inquiry.flag("witnesses-disagree") is None:
        return None
    lost = [test for test in group.operations if test.status == "bands-only"]
    worst = max((test.judged_mev or 0.0 for test in lost), default=0.0)
    if worst < gap_mev:
        return None
    finding = (
        f"{len(lost)} operations of the structure hold for the filled bands, but as the declared "
        f"orbitals carry them they miss by up to {mev(worst)}; the direct gap is {mev(gap_mev)}."
    )
    return finding, {"operations": len(lost), "worst_violation_meV": worst}


def _centre(inquiry: Inquiry) -> Iterator[Cause]:
    code, check = "inversion-centre-shifted", inquiry.findings.declaration
    flag = inquiry.flag(code)
    test = "inversion is tested about every point that the sites allow."
    if flag is not None:
        answer = "yes" if flag.severity == "error" else "no"
        reading = inquiry.reading("centre")
        yield Cause(code, answer, test, flag.summary, flag.evidence, flag.advice, reading)
    elif check is not None:
        finding = f"none of {len(check.centres)} points is better than the structure's centre."
        yield Cause(code, "no", test, finding, {})


def _filling(inquiry: Inquiry) -> Cause:
    findings, flag = inquiry.findings, inquiry.flag("filling-off")
    electrons, gap = findings.electrons, findings.gap
    assert electrons is not None
    readings = inquiry.experiments.of_kind("filling")
    gaps = {r.filling: r.gap.direct_ev for r in readings}
    test = "electrons are counted at the Fermi energy; gaps are looked for at other fillings."
    evidence = {
        "filling": electrons.filling,
        "mean_count_at_fermi": electrons.mean_count,
        "direct_gap_meV": findings.direct_gap_mev,
    } | {f"direct_gap_at_{n}_meV": 1000 * ev for n, ev in gaps.items()}
    found = ", ".join(f"{mev(1000 * ev)} at {n}" for n, ev in gaps.items())
    if flag is not None:
        counted = round(electrons.mean_count) if electrons.mean_count is not None else None
        reading = next((r for r in readings if r.filling == counted), _clearest(readings))
        finding = flag.summary + (f" Direct gaps at other fillings: {found}." if found else "")
        return Cause("filling-off", "yes", test, finding, evidence, flag.advice, reading)
    best, here = _clearest(readings), 0.0 if gap is None else gap.direct_ev
    closed = gap is None or gap.status in ("gapless", "unresolved")
    if closed and best is not None and best.gap.indirect_ev > max(CLEAR_GAP_EV, CLEARER * here):
        typical = inquiry.experiments.typical_gap_ev
        finding = (
            f"at the stated filling of {electrons.filling} the direct gap is {mev(1000 * here)}, "
            f"typically {mev(1000 * typical)}; with {best.filling} bands occupied there is an "
            f"insulator with a gap of {mev(1000 * best.gap.indirect_ev)}, typically "
            f"{mev(1000 * best.typical_gap_ev)}."
        )
        overlap = gap is not None and gap.indirect_ev < -CLEAR_GAP_EV
        within = overlap or best.typical_gap_ev > CLEARER * typical
        advice = "Count the electrons of the Wannier manifold again."
        answer = "yes" if within else "open"
        return Cause("filling-off", answer, test, finding, evidence, advice, best)
    counted_text = (
        "no Fermi energy is given to count at"
        if electrons.mean_count is None
        else f"{electrons.mean_count:.2f} bands lie below the Fermi energy"
    )
    finding = f"{counted_text}" + (f"; direct gaps at other fillings: {found}." if found else ".")
    return Cause("filling-off", "no", test, finding, evidence)


def _clearest(readings: tuple[Rereading, ...]) -> Rereading | None:
    return max(readings, key=lambda r: r.gap.indirect_ev, default=None)


def _fermi(inquiry: Inquiry) -> Iterator[Cause]:
    electrons, flag = inquiry.findings.electrons, inquiry.flag("fermi-outside-gap")
    if electrons is None or electrons.fermi_ev is None:
        return
    test = "the Fermi energy is compared with the edges of the gap."
    if flag is None:
        limit = 1000 * criteria.FERMI_OUTSIDE_EV
        finding = f"it lies in the gap, or outside by less than {limit:.0f} meV."
        yield Cause("fermi-outside-gap", "no", test, finding, {})
    else:
        yield Cause("fermi-outside-gap", "yes", test, flag.summary, flag.evidence, flag.advice)
