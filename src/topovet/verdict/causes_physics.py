"""Causes that lie in what is declared, counted, or in the Hamiltonian itself."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from topovet.diagnosis.results import NoiseTest, Rereading
from topovet.notation import k_text, mev, z2_text
from topovet.spectrum.gap import GAPLESS_EV, UNRESOLVED_EV
from topovet.verdict import criteria
from topovet.verdict.budget import total_error
from topovet.verdict.flags_intake import explained_by_digits
from topovet.verdict.inquiry import Cause, Inquiry

NOISE_FILLED = 0.7
"""Share of elements with a residual of the mean size from which on it counts as noise; Gaussian
noise has 0.99, the physical perturbations of the tests below 0.5."""

NOISE_GROWTH = 0.5
"""And the power of the size of the elements with which the residual may grow: noise of the tests
has up to 0.3, scaled hoppings have 1."""

CLEAR_GAP_EV = 0.02
"""Gap that another filling must have to be taken for the right one (kT at room temperature)."""

CLEARER = 10.0
"""And the factor by which it must exceed the gap at the stated filling; if bands only touch there,
its typical gap must do so too. Inside a group of bands that belong together gaps are small
everywhere, at a transition or a node they close in one place."""


def physics_causes(inquiry: Inquiry) -> Iterator[Cause]:
    """Declaration, centre, filling, noise, symmetries, gap, interpolation, meshes, error bar."""
    yield from _declaration(inquiry)
    yield from _centre(inquiry)
    yield _filling(inquiry)
    yield from _noise(inquiry)
    yield from _time_reversal(inquiry)
    yield from _inversion(inquiry)
    yield _gap(inquiry)
    yield from _interpolation(inquiry)
    yield from _meshes(inquiry)
    yield from _error_bar(inquiry)
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


def _noise(inquiry: Inquiry) -> Iterator[Cause]:
    tests, gap = list(inquiry.noise()), inquiry.findings.direct_gap_mev
    if not tests:
        return
    worst = max(tests, key=lambda t: t.filled)
    test = "the residual of each broken symmetry is looked at element by element of H(R)."
    evidence = {
        "sigma_meV": worst.sigma_mev,
        "filled": worst.filled,
        "growth": worst.growth,
        "direct_gap_meV": gap,
    }
    share = f"{100 * worst.filled:.0f} % of the elements"
    if unlike := _unlike_noise(worst):
        finding = f"what breaks {worst.of} sits on {share}: {unlike}."
        yield Cause("noise", "no", test, finding, evidence)
        return
    finding = (
        f"what breaks {worst.of} is spread over {share} alike, as noise of "
        f"{mev(worst.sigma_mev)} on each would be; the direct gap is {mev(gap)}."
    )
    advice = (
        "Look for what made H(R) noisy: an unconverged run, a lossy copy, digits cut off. "
        "--symmetrise averages the noise over the group."
    )
    yield Cause("noise", "yes", test, finding, evidence, advice, inquiry.reading("symmetrised"))


def _unlike_noise(test: NoiseTest) -> str:
    """What speaks against noise, one clause; empty where nothing does."""
    if test.filled < NOISE_FILLED:
        return "a term that falls off, no noise"
    if test.growth is None:
        return "but all elements are of one size, and noise could not be told from scaled ones"
    if test.growth > NOISE_GROWTH:
        return f"but it grows as their size to the power of {test.growth:.1f}: scaled, no noise"
    return ""


def _time_reversal(inquiry: Inquiry) -> Iterator[Cause]:
    code, flag = "time-reversal-broken", inquiry.flag("time-reversal-broken")
    reversal = inquiry.findings.time_reversal
    test = "U H(k)* U† is compared with H(-k)."
    if flag is None:
        finding = f"they agree to {mev(reversal.violation_mev)}."
        yield Cause(code, "no", test, finding, {"violation_meV": reversal.violation_mev})
        return
    reading = inquiry.reading("symmetrised")
    yield Cause(code, "yes", test, flag.summary, flag.evidence, flag.advice, reading)


def _inversion(inquiry: Inquiry) -> Iterator[Cause]:
    code, flag = "symmetry-broken", inquiry.flag("symmetry-broken")
    violation, radius = inquiry.findings.inversion.violation_mev, inquiry.radius_mev
    test = "every operation of the structure is tested on H; H is averaged over them."
    if flag is None:
        if violation is not None:
            finding = f"inversion holds to {mev(violation)}."
            yield Cause(code, "no", test, finding, {"violation_meV": violation})
        return
    average = inquiry.reading("symmetrised")
    evidence: dict[str, Any] = dict(flag.evidence)
    finding, answer = flag.summary, "yes"
    if average is not None:
        z2 = average.z2
        evidence |= {"moved_meV": average.moved_mev, "z2_if_symmetrised": z2}
        finding += f" Averaging moves bands by up to {mev(average.moved_mev)}"
        finding += "." if z2 is None else f" and gives Z2 = {z2_text(z2)}."
        within = radius is not None and (average.moved_mev or 0.0) < radius
        beside = within and not inquiry.is_largest_error("symmetry")
        answer = "no" if beside and flag.severity == "warning" else "yes"
    yield Cause(code, answer, test, finding, evidence, flag.advice, average)


def _gap(inquiry: Inquiry) -> Cause:
    """The smallest direct gap that anything met: the search, the loops, the closer look."""
    findings, closer = inquiry.findings, inquiry.reading("closer-look")
    met = []
    for gap in (findings.gap, None if closer is None else closer.gap):
        if gap is not None:
            met.append((gap.direct_ev, gap.direct_k))
    for wilson in (findings.wilson, None if closer is None else closer.wilson):
        planes = () if wilson is None else wilson.planes
        met += [(plane.smallest_direct_gap_ev, plane.narrowest_k) for plane in planes]
    test = "the direct gap is followed downhill from a mesh, and on every plane of the loops."
    if not met:
        return Cause("gap-closes", "open", test, "no gap was found at all.", {})
    smallest, k = min(met, key=lambda pair: pair[0])
    split = findings.wilson is not None and findings.wilson.status == "failed"
    evidence = {"smallest_direct_gap_meV": 1000 * smallest, "k": list(k)}
    finding = f"the smallest direct gap met is {mev(1000 * smallest)} at k = {k_text(k)}"
    flag = inquiry.flag("gap-closes")
    advice = "" if flag is None else flag.advice
    if split:
        finding += "; pairs of planes give different strong indices, so it closes between them"
        advice = "Look for nodes between the planes; a semimetal has no strong index."
    answer = "yes" if smallest < GAPLESS_EV or split else "open"
    if smallest >= UNRESOLVED_EV and not split:
        answer = "no"
    return Cause("gap-closes", answer, test, finding + ".", evidence, advice)


def _interpolation(inquiry: Inquiry) -> Iterator[Cause]:
    check, flag = inquiry.findings.interpolation, inquiry.flag("interpolation-poor")
    test = "energies are compared with those of the .eig and _band.dat files."
    if check is None:
        return
    if flag is None:
        worst = max(check.mesh_occupied_mev or 0.0, check.path_occupied_mev or 0.0)
        finding = f"occupied ones agree to {mev(worst)}."
        yield Cause("interpolation-poor", "no", test, finding, {"largest_meV": worst})
        return
    radius = inquiry.radius_mev
    size = flag.evidence.get("mesh_occupied_meV", flag.evidence.get("path_occupied_meV"))
    small = radius is not None and isinstance(size, int | float) and size < radius
    answer = "no" if small and flag.severity == "warning" else "yes"
    reading = inquiry.reading("bare")
    yield Cause(
        "interpolation-poor", answer, test, flag.summary, flag.evidence, flag.advice, reading
    )


def _meshes(inquiry: Inquiry) -> Iterator[Cause]:
    wilson, closer = inquiry.findings.wilson, inquiry.reading("closer-look")
    if wilson is None or closer is None or closer.wilson is None:
        return
    test = "Wilson loops are followed on denser lines, the gap is looked for on a denser mesh."
    evidence = {"z2": wilson.z2, "z2_on_denser_lines": closer.wilson.z2}
    if wilson.status == "ok" and closer.wilson.z2 == wilson.z2:
        yield Cause("wilson-unresolved", "no", test, "the indices stay the same.", evidence)
        return
    if closer.wilson.status == "ok":
        finding = f"there Wilson loops give Z2 = {z2_text(closer.wilson.z2)}."
        advice = "Run again with --effort thorough."
        yield Cause("wilson-unresolved", "yes", test, finding, evidence, advice, closer)
        return
    finding = f"they stay unresolved: {closer.wilson.reason.rstrip('.')}."
    yield Cause("wilson-unresolved", "no", test, finding, evidence)


def _error_bar(inquiry: Inquiry) -> Iterator[Cause]:
    radius = inquiry.radius_mev
    budget = inquiry.errors_mev()
    if radius is None or not budget:
        return
    if digits := _digits(inquiry):
        yield digits
        return
    total = total_error(dict(budget))
    largest = next(iter(budget))
    test = "the known errors of the input are added up and set against half of the direct gap."
    finding = (
        f"they add up to {mev(total)}, the largest is {largest.replace('_', ' ')} with "
        f"{mev(budget[largest])}; the robustness radius is {mev(radius)}."
    )
    flag, gap = inquiry.flag("inside-error-bar"), inquiry.findings.gap
    if flag is None and gap is not None and gap.status in ("gapless", "unresolved"):
        finding = f"they add up to {mev(total)}; the gap closes whatever they are."
        yield Cause("inside-error-bar", "no", test, finding, {"errors_meV": total})
        return
    answer = "yes" if total >= radius else "no"
    advice = "" if flag is None else flag.advice
    evidence = {"errors_meV": total, "radius_meV": radius, "largest": largest}
    yield Cause("inside-error-bar", answer, test, finding, evidence, advice, explains=frozenset())


def _digits(inquiry: Inquiry) -> Cause | None:
    """The digits of the file alone, where they have a flag of their own."""
    flag, findings = inquiry.flag("inside-error-bar"), inquiry.findings
    if flag is None or "rounding_meV" not in flag.evidence or "errors_meV" in flag.evidence:
        return None
    test = "what the printed digits leave open is set against the gap and what was measured."
    explains = frozenset(explained_by_digits(findings))
    if explains or flag.severity == "error":
        explains |= {"parity-impure", "witnesses-disagree", "wilson-unresolved"}
    if flag.severity == "error":
        explains |= {"symmetry-broken", "fermi-outside-gap", "range-truncated", "gap-closes"}
    return Cause(
        flag.code, "yes", test, flag.summary, flag.evidence, flag.advice, explains=explains
    )


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
