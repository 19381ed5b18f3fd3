"""The verdict in words: one sentence, what it rests on, and what is still open."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.report.material import ReportMaterial
from topovet.report.notation import ev, k_text, mev, one_line, significant, z2_text
from topovet.verdict.document import Verdict


@dataclass(frozen=True, slots=True)
class ClassWords:
    """A class in words: heading, noun phrase for a sentence, and what it means."""

    title: str
    noun: str
    meaning: str


_CLASSES = {
    "strong-ti": ClassWords(
        "Strong topological insulator",
        "a strong topological insulator",
        "As long as time reversal holds and the bulk gap stays open, every surface carries "
        "conducting states with an odd number of Dirac cones.",
    ),
    "weak-ti": ClassWords(
        "Weak topological insulator",
        "a weak topological insulator",
        "The strong index is zero but a weak one is not: like a stack of two-dimensional "
        "topological layers, it conducts on side surfaces while the stacking stays regular.",
    ),
    "crystalline-ti": ClassWords(
        "Topological crystalline insulator",
        "a topological crystalline insulator",
        "The time-reversal indices are zero; symmetries of the crystal protect conducting states "
        "on those surfaces that keep them.",
    ),
    "higher-order": ClassWords(
        "Higher-order topological insulator",
        "a higher-order topological insulator",
        "Surfaces may be gapped, but conducting channels run along hinges of a crystal whose "
        "shape keeps the protecting symmetry.",
    ),
    "chern": ClassWords(
        "Chern insulator",
        "a Chern insulator",
        "Time reversal is broken and a Chern number is not zero: edges or side surfaces conduct "
        "in one direction.",
    ),
    "axion-candidate": ClassWords(
        "Axion-insulator candidate",
        "a candidate for an axion insulator",
        "Inversion indicators allow a quantised magnetoelectric response; the Chern numbers must "
        "vanish for it, which the indicators alone do not show.",
    ),
    "trivial": ClassWords(
        "Trivial",
        "trivial by the indices that were computed",
        "All indices that were computed are zero. Kinds of topology that this report lists as "
        "not tested are not excluded.",
    ),
    "weyl-semimetal": ClassWords(
        "Weyl semimetal",
        "a Weyl semimetal",
        "Bands touch at isolated points that carry a chirality; no gapped state has these "
        "indicators.",
    ),
    "dirac-semimetal": ClassWords(
        "Dirac semimetal",
        "a Dirac semimetal",
        "Doubly degenerate bands touch at isolated points that a crystal symmetry protects.",
    ),
    "nodal-line": ClassWords(
        "Nodal-line semimetal", "a nodal-line semimetal", "Bands touch along lines in k-space."
    ),
    "metal": ClassWords(
        "Metal",
        "a metal without a direct gap above the filled bands",
        "No gap separates the filled bands from the rest, so indices of the filled bands do not "
        "exist.",
    ),
    "undetermined": ClassWords(
        "Undetermined",
        "undetermined",
        "The tests that were made do not carry a conclusion. This says nothing about the "
        "material itself.",
    ),
}

_STRONG_2D = ClassWords(
    "Two-dimensional topological insulator",
    "a two-dimensional topological insulator (quantum spin Hall insulator)",
    "As long as time reversal holds and the bulk gap stays open, every edge carries a pair of "
    "counter-propagating conducting channels.",
)


def class_words(verdict: Verdict) -> ClassWords:
    """Heading, noun phrase and meaning of the verdict's class, for its dimension."""
    if verdict.class_ == "strong-ti" and verdict.case.dimension == 2:
        return _STRONG_2D
    return _CLASSES[verdict.class_]


def subject(verdict: Verdict) -> str:
    """Name, formula and space group of the case, in one phrase."""
    case = verdict.case
    group = f", {case.space_group.symbol}" if case.space_group is not None else ""
    return one_line(f"{case.name} ({case.formula}{group})")


def verdict_sentence(verdict: Verdict) -> str:
    """What is concluded, on how many witnesses, with which gap, in one sentence."""
    return f"{subject(verdict)} {predicate(verdict)}"


def predicate(verdict: Verdict) -> str:
    """The sentence without its subject."""
    if verdict.class_ == "undetermined":
        return f"stays undetermined: {_obstacle(verdict)}."
    judged = f"is judged to be {class_words(verdict).noun}"
    clauses = [judged, _index_clause(verdict), _gap_clause(verdict)]
    sentence = ", ".join(c for c in clauses if c)
    errors = sum(flag.severity == "error" for flag in verdict.flags)
    if errors:
        plural = "s" if errors > 1 else ""
        sentence += f"; {errors} error-level flag{plural} speak{'' if plural else 's'} against it"
    return sentence + "."


def _index_clause(verdict: Verdict) -> str:
    witnesses = {
        "one-witness": "on one witness",
        "agree": "on witnesses that agree",
        "disagree": "although witnesses disagree",
        "undetermined": "on no witness",
    }[verdict.agreement]
    if verdict.invariants.z2 is None:
        return witnesses
    return f"Z₂ = {z2_text(verdict.invariants.z2)} {witnesses}"


def _gap_clause(verdict: Verdict) -> str:
    gap = verdict.gap
    if gap.direct_eV is None or gap.status == "gapless":
        return ""
    if gap.direct_proved_min_eV is not None:
        known = f"with a direct gap proved to exceed {ev(gap.direct_proved_min_eV)}"
    else:
        known = f"with a direct gap of at most {ev(gap.direct_eV)} (sampled, not proved)"
    overlap = gap.indirect_eV is not None and gap.indirect_eV < 0
    return known + (" and bands that overlap in energy" if overlap else "")


def _obstacle(verdict: Verdict) -> str:
    for flag in verdict.flags:
        if flag.severity == "error":
            return one_line(flag.summary).rstrip(".")
    parity = verdict.witnesses.parity
    if parity.status != "ok" and parity.reason:
        return f"the parity witness is {parity.status} ({one_line(parity.reason).rstrip('.')})"
    if verdict.confidence.reasons:
        return one_line(verdict.confidence.reasons[0]).rstrip(".")
    return "no witness gives an index"


def grounds(material: ReportMaterial) -> tuple[str, ...]:
    """What the conclusion rests on: one sentence for each piece of evidence, with numbers."""
    return tuple(
        line
        for line in (
            *_parity_ground(material),
            *_second_grounds(material.verdict),
            _gap_ground(material.verdict),
            _symmetry_ground(material),
            _interpolation_ground(material),
        )
        if line
    )


def _parity_ground(material: ReportMaterial) -> tuple[str, ...]:
    parity = material.verdict.witnesses.parity
    if parity.status != "ok":
        reason = one_line(parity.reason).rstrip(".")
        return (f"The parity witness is {parity.status}: {reason}.",)
    purity = min((t.purity for t in parity.trim), default=0.0)
    lines = [
        f"Parities of the filled states were read at {len(parity.trim)} time-reversal-invariant "
        f"momenta; every state there is even or odd to a purity of {purity:.4f} or better."
    ]
    if parity.z2 is not None:
        odd = sum(t.delta < 0 for t in parity.trim)
        lines.append(
            f"At {odd} of these momenta the product of one parity per Kramers pair is −1: "
            f"Z₂ = {z2_text(parity.z2)} by the formula of Fu and Kane."
        )
    return tuple(lines)


def _second_grounds(verdict: Verdict) -> tuple[str, ...]:
    wilson, surface = verdict.witnesses.wilson, verdict.witnesses.surface
    lines = []
    if wilson.status == "ok":
        lines.append(f"Wilson loops give Z₂ = {z2_text(wilson.z2)}.")
    if surface.status == "ok":
        lines.append(f"Surface states give a strong index of {surface.z2_strong}.")
    return tuple(lines)


def _gap_ground(verdict: Verdict) -> str:
    gap = verdict.gap
    if gap.direct_eV is None:
        return ""
    met = f"The smallest direct gap that was met is {ev(gap.direct_eV)} at k = {k_text(gap.direct_k)}"
    if gap.direct_proved_min_eV is not None:
        return f"{met}; it is proved to exceed {ev(gap.direct_proved_min_eV)} everywhere."
    return f"{met}; this is a sample, so the true minimum may be smaller."


def _symmetry_ground(material: ReportMaterial) -> str:
    reversal, inversion = material.time_reversal, material.inversion
    time = "holds" if reversal.present else "is broken"
    line = f"Time reversal {time} (residual {mev(reversal.violation_mev)})"
    if inversion.violation_mev is None:
        return f"{line}; inversion was not measured."
    held = "is kept" if inversion.present else "is not kept"
    return f"{line}; inversion {held} to {mev(inversion.violation_mev)}."


def _interpolation_ground(material: ReportMaterial) -> str:
    check = material.interpolation
    if check is None:
        return ""
    parts = []
    if check.mesh_occupied_mev is not None:
        parts.append(
            f"the first-principles energies on the mesh to {mev(check.mesh_occupied_mev)}"
        )
    if check.path_occupied_mev is not None:
        parts.append(f"Wannier90's own bands on the path to {mev(check.path_occupied_mev)}")
    return f"Filled bands reproduce {' and '.join(parts)}." if parts else ""


def untested(material: ReportMaterial) -> tuple[str, ...]:
    """What this run leaves open, one sentence each."""
    verdict = material.verdict
    lines = []
    if verdict.witnesses.wilson.status != "ok":
        lines.append(_open_witness("Wilson loops", verdict.witnesses.wilson.reason))
    if verdict.witnesses.surface.status != "ok":
        lines.append(_open_witness("Surface and edge states", verdict.witnesses.surface.reason))
    if verdict.gap.direct_proved_min_eV is None:
        lines.append(
            "The gap between the sampled k-points: a closing there would void every index."
        )
    if not _compared(material):
        lines.append(
            "How well the Hamiltonian reproduces first-principles energies: no file to compare "
            "with was given."
        )
    lines.append(
        "Whether the functional orders the bands rightly. Semilocal functionals misjudge band "
        "inversions; hybrid functionals roughly halve the share of nontrivial compounds "
        "(Mirhosseini et al., arXiv:2507.10736)."
    )
    return tuple(lines)


def _open_witness(name: str, reason: str) -> str:
    return f"{name}: {one_line(reason).rstrip('.') or 'not tested'}."


def _compared(material: ReportMaterial) -> bool:
    check = material.interpolation
    return check is not None and (check.mesh_points > 0 or check.path_points > 0)


def radius_note(verdict: Verdict) -> str:
    """What the robustness radius is, against the largest known error of the input."""
    known = {k: v for k, v in verdict.robustness.errors_meV.items() if v is not None}
    kind = "of the proved gap" if verdict.robustness.proved else "of the sampled gap"
    if not known or verdict.robustness.radius_meV is None:
        return f"half {kind}"
    name, worst = max(known.items(), key=lambda item: item[1])
    if worst <= 0:
        return f"half {kind}; no known error of the input reaches it"
    ratio = verdict.robustness.radius_meV / worst
    return (
        f"half {kind}; {significant(ratio, 2)} times the largest known error "
        f"({one_line(name)}, {mev(worst)})"
    )
