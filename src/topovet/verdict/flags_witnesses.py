"""Flags from the witnesses: each alone, side by side, and against the error bar."""

from __future__ import annotations

from collections.abc import Iterator

from topovet.invariants.parity import MIN_PURITY
from topovet.notation import mev
from topovet.spectrum.gap import UNRESOLVED_EV
from topovet.verdict import criteria
from topovet.verdict.agreement import weigh
from topovet.verdict.allowed import list_flags
from topovet.verdict.budget import error_budget, robustness_radius, total_error
from topovet.verdict.conclude import witness_statements
from topovet.verdict.crystalline import indicator_conflicts
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.semimetal import conclude_nodes


def witness_flags(findings: Findings) -> Iterator[Flag]:
    """Each witness, the witnesses side by side, and the error bar."""
    yield from _parity(findings)
    yield from _wilson(findings)
    if not conclude_nodes(findings).class_:  # without a gap indices need not agree
        yield from _disagreement(findings)
        yield from _mirrors(findings)
    yield from _arcs(findings)
    yield from _error_bar(findings)


def _parity(findings: Findings) -> Iterator[Flag]:
    parity = findings.parity
    if parity is None or not parity.trim:
        return
    trim = parity.trim
    if conclude_nodes(findings).class_:
        # at a node the filled states are half of a level, of no parity
        trim = tuple(t for t in trim if t.gap_ev >= UNRESOLVED_EV)
    worst = min(trim, key=lambda t: t.purity, default=None)
    if worst is None:
        return
    if worst.purity >= criteria.PURITY_WARNING:
        return
    unreadable = worst.purity < MIN_PURITY
    yield Flag(
        "parity-impure",
        "error" if unreadable else "warning",
        f"occupied states at k = ({', '.join(f'{c:g}' for c in worst.k)}) have |parity| down to "
        f"{worst.purity:.3f}; "
        + ("they cannot be read." if unreadable else "they were read as +1 or -1."),
        {
            "purity": worst.purity,
            "k": list(worst.k),
            "trim_violation_meV": worst.violation_mev,
            "trim_gap_meV": 1000 * worst.gap_ev,
        },
        "Check the order and kind of the declared projections and the inversion centre; if they "
        "are right, the Wannier functions break inversion.",
    )


def _wilson(findings: Findings) -> Iterator[Flag]:
    wilson = findings.wilson
    if wilson is None or wilson.status not in ("unresolved", "failed"):
        return
    yield Flag(
        "wilson-unresolved",
        "error" if wilson.status == "failed" else "warning",
        f"Wilson loops give no index: {wilson.reason.rstrip('.')}.",
        {
            "n_solves": wilson.n_solves,
            "open_planes": [plane.plane for plane in wilson.planes if plane.status != "ok"],
        },
        "Look at the smallest direct gap of these planes; with --effort thorough the budget is "
        "larger.",
    )


def _disagreement(findings: Findings) -> Iterator[Flag]:
    statements = witness_statements(findings)
    agreement = weigh(statements)
    if agreement.word == "disagree":
        said = ", ".join(f"{s.witness} {_indices(s.z2)}" for s in statements)
        yield Flag(
            "witnesses-disagree",
            "error",
            f"the witnesses give different Z2 indices: {said}.",
            {s.witness: _indices(s.z2) for s in statements}
            | {
                "disputed": list(agreement.disputed),
                "inversion_violation_meV": findings.inversion.violation_mev,
            },
            "The other flags name what breaks the ground of one of them; trust none until it is "
            "mended.",
        )
    yield from _chern_against_parity(findings)
    yield from _surface(findings)


def _mirrors(findings: Findings) -> Iterator[Flag]:
    """Mirror Chern numbers against Z2, against rotation eigenvalues, and against the gap."""
    mirror = findings.mirror
    if mirror is None:
        return
    agreed = weigh(witness_statements(findings)).z2
    dimension = findings.declared.crystal.dimension
    wrong = mirror.contradicts(agreed) if agreed is not None else ()
    if wrong or not mirror.allowed_z2(dimension):
        shown = wrong or mirror.planes
        numbers = {p.name: p.number for p in shown if p.number is not None}
        yield Flag(
            "witnesses-disagree",
            "error",
            "mirror Chern numbers have another parity than the Z2 indices give their planes: "
            + ", ".join(f"{name}: {n}" for name, n in numbers.items())
            + ".",
            {"z2": None if agreed is None else _indices(agreed), **numbers},
            "The other flags name what breaks the ground of one of them; trust none until it is "
            "mended.",
        )
    if not wrong and not indicator_conflicts(findings):
        yield from list_flags(findings)
    for indicator, plane in indicator_conflicts(findings):
        yield Flag(
            "witnesses-disagree",
            "error",
            f"the mirror Chern number of {plane.name} is {plane.number}, but rotation eigenvalues "
            f"say {indicator.mirror_chern} modulo {indicator.n}.",
            {"mirror_chern": plane.number, "by_rotation": indicator.mirror_chern},
            "A gap that closes on the plane, or a rotation that the Hamiltonian breaks.",
        )
    for plane in mirror.planes:
        closes = None if plane.evidence is None else plane.evidence.closes_near
        if closes is None:
            continue
        yield Flag(
            "gap-closes",
            "error",
            f"the number of filled states of either mirror eigenvalue differs between two points "
            f"of the mirror plane {plane.name}: the gap closes between them, though sampling did "
            "not meet it.",
            {"mirror_plane": plane.name, "k": list(closes)},
            "Look at the bands of this plane on a fine mesh; if they cross there, the compound is "
            "a nodal-line or Dirac semimetal.",
        )


def _indices(z2: tuple[int | None, ...]) -> str:
    """1;(000), with "?" for an index the witness does not know."""
    strong, *weak = ["?" if value is None else str(value) for value in z2]
    return f"{strong};({''.join(weak)})" if weak else strong


def _chern_against_parity(findings: Findings) -> Iterator[Flag]:
    """(-1)^C of a plane is the product of its parities (2D, without Kramers pairs)."""
    parity, chern = findings.parity, findings.chern
    if findings.kramers or parity is None or chern is None or chern.chern is None:
        return
    if parity.status != "ok" or len(chern.chern) != 1:
        return
    odd = sum(t.n_minus for t in parity.trim) % 2
    if odd != chern.chern[0] % 2:
        yield Flag(
            "witnesses-disagree",
            "error",
            f"the Chern number is {chern.chern[0]}, but parities say it is "
            f"{'odd' if odd else 'even'}.",
            {"chern": chern.chern[0], "odd_by_parities": bool(odd)},
            "The other flags name what breaks the ground of one of them.",
        )


def _surface(findings: Findings) -> Iterator[Flag]:
    """Edge levels against the Chern number, and a surface that contradicts itself."""
    surface, chern = findings.surface, findings.chern
    if surface is None:
        return
    if surface.status == "failed":
        yield Flag(
            "witnesses-disagree",
            "warning",
            f"surface levels give no index: {surface.reason.rstrip('.')}.",
            {"miller": list(surface.miller)},
            "Follow another surface with --surface, or with --effort thorough; crossings of both "
            "terminations must have one parity while time reversal holds.",
        )
    known = None if chern is None or chern.status != "ok" else chern.chern
    if surface.chern is not None and known is not None and known != (surface.chern,):
        yield Flag(
            "witnesses-disagree",
            "error",
            f"the Chern number is {known[0]}, but edge levels count {surface.chern}.",
            {"chern": known[0], "by_edge_levels": surface.chern},
            "The other flags name what breaks the ground of one of them.",
        )


def _arcs(findings: Findings) -> Iterator[Flag]:
    """Chiralities of nodes against the levels of a surface around their projections."""
    arcs = findings.arcs
    if arcs is None or arcs.status != "disagree":
        return
    yield Flag(
        "witnesses-disagree",
        "error",
        f"surface levels and chiralities of nodes disagree: {arcs.reason}.",
        {
            "miller": list(arcs.miller),
            "by_nodes": [arcs.projections[c.projection].chirality for c in arcs.loops],
            "by_surface_levels": [
                "open" if c.chirality is None else str(c.chirality) for c in arcs.loops
            ],
        },
        "A node may be missing from the list, or a chirality be wrong: try --effort thorough, and "
        "another surface with --surface.",
    )


def _error_bar(findings: Findings) -> Iterator[Flag]:
    radius = robustness_radius(findings)
    if radius is None or findings.gap is None or findings.gap.status == "gapless":
        return
    budget = error_budget(findings)
    total = total_error(budget)
    rounding = budget["rounding"]
    if total < radius or (rounding is not None and rounding >= radius):
        return  # digits too few for the gap have a flag of their own
    yield Flag(
        "inside-error-bar",
        "warning",
        f"the known errors add up to {mev(total)}, the robustness radius (half of the "
        f"direct gap) is {mev(radius)}.",
        {"errors_meV": total, "radius_meV": radius}
        | {f"{name}_meV": value for name, value in budget.items()},
        "Remove the largest error first; until then the indices hold for the symmetric average "
        "of this Hamiltonian only.",
    )
