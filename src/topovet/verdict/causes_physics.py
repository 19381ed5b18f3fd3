"""Causes that lie in the Hamiltonian itself, and in how closely it was looked at."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from topovet.diagnosis.results import NoiseTest, Rereading
from topovet.notation import k_text, mev, z2_text
from topovet.spectrum.gap import GAPLESS_EV, UNRESOLVED_EV
from topovet.verdict.budget import total_error
from topovet.verdict.flags_intake import explained_by_digits
from topovet.verdict.inquiry import Cause, Inquiry

NOISE_FILLED = 0.7
"""Share of elements with a residual of the mean size from which on it counts as noise; Gaussian
noise has 0.99, the physical perturbations of the tests below 0.5."""

NOISE_GROWTH = 0.5
"""And the power of the size of the elements with which the residual may grow: noise of the tests
has up to 0.3, scaled hoppings have 1."""


def physics_causes(inquiry: Inquiry) -> Iterator[Cause]:
    """Noise, symmetries, gap, interpolation, meshes, error bar."""
    yield from _noise(inquiry)
    yield from _time_reversal(inquiry)
    yield from _inversion(inquiry)
    yield _gap(inquiry)
    yield from _interpolation(inquiry)
    yield from _meshes(inquiry)
    yield from _error_bar(inquiry)


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
    average, far = _average(inquiry)
    yield Cause("noise", "yes", test, finding, evidence, advice, average, far=far)


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
    average, far = _average(inquiry)
    yield Cause(code, "yes", test, flag.summary, flag.evidence, flag.advice, average, far=far)


def _average(inquiry: Inquiry) -> tuple[Rereading | None, bool]:
    """The Hamiltonian averaged over its group, and whether it is too far to speak for it.

    By Weyl's inequality no gap closes between the two while their distance is below half of the
    gap of either. Further away the average is another Hamiltonian, and its indices say nothing.
    """
    average = inquiry.reading("symmetrised")
    if average is None or average.moved_mev is None:
        return average, True
    own_radius = 500.0 * average.gap.direct_ev
    return average, average.moved_mev >= max(inquiry.radius_mev or 0.0, own_radius)


def _inversion(inquiry: Inquiry) -> Iterator[Cause]:
    code, flag = "symmetry-broken", inquiry.flag("symmetry-broken")
    violation, radius = inquiry.findings.inversion.violation_mev, inquiry.radius_mev
    test = "every operation of the structure is tested on H; H is averaged over them."
    if flag is None:
        if violation is not None:
            finding = f"inversion holds to {mev(violation)}."
            yield Cause(code, "no", test, finding, {"violation_meV": violation})
        return
    average, far = _average(inquiry)
    evidence: dict[str, Any] = dict(flag.evidence)
    finding, answer = flag.summary, "yes"
    if average is not None:
        evidence["moved_meV"] = average.moved_mev
        finding += f" Averaging moves bands by up to {mev(average.moved_mev)}"
        finding += ", too far to tell from it what a sound file would say." if far else "."
        within = radius is not None and (average.moved_mev or 0.0) < radius
        beside = within and not inquiry.is_largest_error("symmetry")
        answer = "no" if beside and flag.severity == "warning" else "yes"
    if average is not None and average.z2 is not None and not far:
        evidence["z2_if_symmetrised"] = average.z2
        finding = f"{finding[:-1]} and gives Z2 = {z2_text(average.z2)}."
    yield Cause(code, answer, test, finding, evidence, flag.advice, average, far=far)


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
    finding, bare = flag.summary, inquiry.reading("bare")
    evidence: dict[str, Any] = dict(flag.evidence)
    if bare is not None:  # not how it would be mended: only what hangs on the shifts
        evidence |= {"z2_without_shifts": bare.z2, "moved_without_shifts_meV": bare.moved_mev}
        finding += f" Without any shifts bands would move by up to {mev(bare.moved_mev)}."
    yield Cause("interpolation-poor", answer, test, finding, evidence, flag.advice)


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
