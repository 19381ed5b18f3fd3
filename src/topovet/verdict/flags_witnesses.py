"""Flags from the witnesses: each alone, side by side, and against the error bar."""

from __future__ import annotations

from collections.abc import Iterator

from topovet.invariants.parity import MIN_PURITY
from topovet.notation import mev
from topovet.verdict import criteria
from topovet.verdict.agreement import weigh
from topovet.verdict.budget import error_budget, robustness_radius, total_error
from topovet.verdict.conclude import witness_statements
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag


def witness_flags(findings: Findings) -> Iterator[Flag]:
    """Each witness, the witnesses side by side, and the error bar."""
    yield from _parity(findings)
    yield from _wilson(findings)
    yield from _disagreement(findings)
    yield from _error_bar(findings)


def _parity(findings: Findings) -> Iterator[Flag]:
    parity = findings.parity
    if parity is None or not parity.trim:
        return
    worst = min(parity.trim, key=lambda t: t.purity)
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
        f"the known errors add up to {mev(total)}, the robustness radius (half of the sampled "
        f"direct gap) is {mev(radius)}.",
        {"errors_meV": total, "radius_meV": radius}
        | {f"{name}_meV": value for name, value in budget.items()},
        "Remove the largest error first; until then the indices hold for the symmetric average "
        "of this Hamiltonian only.",
    )
