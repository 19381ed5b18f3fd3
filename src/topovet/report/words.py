"""The verdict in words: one sentence, what it rests on, and what is still open."""

from __future__ import annotations

from topovet.notation import ev, k_text, mev, nonzero_by_plane, one_line, significant, z2_text
from topovet.report.classes import class_words
from topovet.report.material import ReportMaterial
from topovet.verdict.document import Verdict
from topovet.verdict.semimetal import SEMIMETALS


def subject(verdict: Verdict) -> str:
    """Name, formula (where it is not the name) and space group of the case, in one phrase."""
    case = verdict.case
    known = [case.formula] if case.formula != case.name else []
    if case.space_group is not None:
        known.append(case.space_group.symbol)
    return one_line(f"{case.name} ({', '.join(known)})" if known else case.name)


def verdict_sentence(verdict: Verdict) -> str:
    """What is concluded, on how many witnesses, with which gap, in one sentence."""
    return f"{subject(verdict)} {predicate(verdict)}"


def predicate(verdict: Verdict) -> str:
    """The sentence without its subject."""
    if verdict.class_ == "undetermined":
        return f"stays undetermined: {_obstacle(verdict)}."
    judged = f"is judged to be {class_words(verdict).noun}"
    clauses = [judged, _index_clause(verdict), _gap_clause(verdict)]
    if verdict.class_ in SEMIMETALS:
        clauses = [judged, node_clause(verdict)]
    sentence = ", ".join(c for c in clauses if c)
    errors = sum(flag.severity == "error" for flag in verdict.flags)
    if errors:
        plural = "s" if errors > 1 else ""
        sentence += f"; {errors} error-level flag{plural} speak{'' if plural else 's'} against it"
    return sentence + "."


def node_clause(verdict: Verdict) -> str:
    """How many points and lines, at which filling, and what is proved beside them."""
    if verdict.nodes is None or verdict.node_search is None:
        return ""
    count = f"with {node_count(verdict)} at filling {verdict.electrons.filling}"
    if not verdict.node_search.complete:
        return f"{count}, maybe more"
    elsewhere = mev(verdict.node_search.gap_elsewhere_meV)
    return f"{count} and a direct gap proved to exceed {elsewhere} everywhere else"


def node_count(verdict: Verdict) -> str:
    """E.g. "2 Weyl points (chiralities ±1) and 1 nodal line"."""
    entries = verdict.nodes or ()
    parts = []
    for kind, name in NODE_NAMES.items():
        chosen = [n for n in entries if n.kind == kind]
        number = sum(n.images for n in chosen) if kind == "line" else len(chosen)
        if number:
            sizes = sorted({abs(n.chirality) for n in chosen if n.chirality})
            charges = f" (chiralities {', '.join(f'±{c}' for c in sizes)})" if sizes else ""
            parts.append(f"{number} {name}{'s' if number > 1 else ''}{charges}")
    return " and ".join(parts) or "no closing"


NODE_NAMES = {
    "weyl": "Weyl point",
    "dirac": "Dirac point",
    "multifold": "multifold point",
    "accidental": "accidental touching",
    "uncharacterised": "uncharacterised point",
    "line": "nodal line",
}


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
        state = status_words(parity.status)
        return f"the parity witness {state} ({one_line(parity.reason).rstrip('.')})"
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
        return (f"The parity witness {status_words(parity.status)}: {reason}.",)
    purity = min((t.purity for t in parity.trim), default=0.0)
    lines = [
        f"Parities of the filled states were read at {len(parity.trim)} time-reversal-invariant "
        f"momenta; every state there is even or odd, with a purity of at least {purity:.4f} (1 is "
        "exact)."
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
        lines.append(
            f"Wilson loops give Z₂ = {z2_text(wilson.z2)} on {len(wilson.planes)} "
            f"plane{'' if len(wilson.planes) == 1 else 's'}, without any use of inversion."
        )
    mirrors = verdict.invariants.mirror_chern
    if mirrors:
        lines.append(
            f"Mirror Chern numbers of {len(mirrors)} plane{'' if len(mirrors) == 1 else 's'}: "
            f"{nonzero_by_plane(mirrors) or 'all 0'}."
        )
    if surface.status == "ok":
        lines.append(f"Surface states give a strong index of {surface.z2_strong}.")
    return tuple(lines)


def _gap_ground(verdict: Verdict) -> str:
    gap, search = verdict.gap, verdict.node_search
    if gap.direct_eV is None:
        return ""
    if search is not None and search.complete and verdict.nodes:
        was = "was" if node_count(verdict).startswith("1 ") else "were"
        found = f"The direct gap closes: {node_count(verdict)} {was} located. "
        beyond = f"Everywhere else it is proved to exceed {mev(search.gap_elsewhere_meV)}"
        if search.chirality_sum is None or all(n.kind == "line" for n in verdict.nodes):
            return f"{found}{beyond}."
        return f"{found}{beyond}, and the chiralities add up to {search.chirality_sum}."
    met = (
        f"The smallest direct gap that was met is {ev(gap.direct_eV)} at k = {k_text(gap.direct_k)}"
    )
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
        parts.append(f"the first-principles energies on the mesh to {mev(check.mesh_occupied_mev)}")
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
    if verdict.class_ in SEMIMETALS:
        lines.append("Whether the filling is the compound's own: the class holds at this filling.")
    elif verdict.gap.direct_proved_min_eV is None:
        lines.append(
            "The gap between the sampled k-points: a closing there would void every index."
        )
    if verdict.case.dimension == 3 and verdict.case.spinful:
        lines.append(
            "Invariants of glides, screws and rotations, beyond the indicators that are listed."
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


def status_words(status: str) -> str:
    """A witness's status as the end of a sentence."""
    return {
        "ok": "is sound",
        "failed": "failed",
        "not-applicable": "does not apply",
        "unresolved": "is unresolved",
    }[status]


def _open_witness(name: str, reason: str) -> str:
    return f"{name}: {one_line(reason).rstrip('.') or 'not tested'}."


def _compared(material: ReportMaterial) -> bool:
    check = material.interpolation
    return check is not None and (check.mesh_points > 0 or check.path_points > 0)


def radius_note(verdict: Verdict) -> str:
    """What the robustness radius is, against the largest known error of the input."""
    known = {k: v for k, v in verdict.robustness.errors_meV.items() if v is not None}
    kind = "of the proved gap" if verdict.robustness.proved else "of the sampled gap"
    if verdict.class_ in SEMIMETALS:
        kind = "of the smallest gap on the surfaces around the nodes"
    if verdict.robustness.radius_meV is None:
        return "no gap to take the half of"
    if not known:
        return f"half {kind}"
    name, worst = max(known.items(), key=lambda item: item[1])
    if worst <= 0:
        return f"half {kind}; no known error of the input reaches it"
    ratio = verdict.robustness.radius_meV / worst
    return (
        f"half {kind}; {significant(ratio, 2)} times the largest known error "
        f"({one_line(name)}, {mev(worst)})"
    )
