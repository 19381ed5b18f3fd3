"""Flags from the symmetry tests: spin, time reversal, spin-orbit coupling, inversion."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from topovet.notation import mev
from topovet.verdict import criteria
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.flags_declaration import declaration_flags
from topovet.verdict.semimetal import conclude_nodes


def symmetry_flags(findings: Findings) -> Iterator[Flag]:
    """Spin, time reversal, centre and orbitals as declared, then what may follow from them."""
    yield from _spin_order(findings)
    yield from _time_reversal(findings)
    yield from _spin_orbit(findings)
    yield from declaration_flags(findings)
    yield from _inversion(findings)
    yield from _group(findings)


def _spin_order(findings: Findings) -> Iterator[Flag]:
    order, limit = findings.spin_order, findings.time_reversal.tolerance_mev
    best = min((v for v in (order.interlaced_mev, order.block_mev) if v is not None), default=None)
    if order.found == "none" and best is not None and best <= limit < order.spinless_mev:
        yield Flag(
            "spin-order-mismatch",
            "error",
            f"the Hamiltonian is declared spinless, but time reversal fails for it so by "
            f"{mev(order.spinless_mev)} and holds with spin to {mev(best)}.",
            {"spinless_meV": order.spinless_mev, "spinful_meV": best},
            "Set spinors = true in the .win file.",
        )
    if order.swapped_pairs and order.swapped_mev is not None and order.swapped_mev <= limit:
        yield _swapped_pairs(order.swapped_pairs, order.swapped_mev, order.interlaced_mev)
    if order.found != "block":
        return
    yield Flag(
        "spin-order-mismatch",
        "warning",
        f"spinors are ordered all up, then all down: time reversal holds to "
        f"{mev(order.block_mev)} in that order and misses by {mev(order.interlaced_mev)} in "
        "Wannier90's. The order found is used.",
        {"block_meV": order.block_mev, "interlaced_meV": order.interlaced_mev},
        "Reorder the file to up, down of each orbital, or keep it and mind this in other tools.",
    )


def _swapped_pairs(pairs: tuple[int, ...], swapped: float, as_is: float | None) -> Flag:
    shown = ", ".join(f"{2 * i + 1} and {2 * i + 2}" for i in pairs[:6])
    return Flag(
        "spin-order-mismatch",
        "error",
        f"{len(pairs)} orbitals have spin up and down interchanged, or phases that are not real "
        f"(functions {shown}{', …' if len(pairs) > 6 else ''}): with them turned round time "
        f"reversal holds to {mev(swapped)}.",
        {"orbitals": list(pairs), "swapped_meV": swapped, "interlaced_meV": as_is},
        "Bring all orbitals to the order up, down, as the projections declare them.",
    )


def _time_reversal(findings: Findings) -> Iterator[Flag]:
    test, gap = findings.time_reversal, findings.direct_gap_mev
    evidence = {
        "violation_meV": _finite(test.violation_mev),
        "violation_real_space_meV": _finite(test.violation_r_mev),
        "violation_without_shifts_meV": test.violation_unshifted_mev,
        "kramers_splitting_meV": test.kramers_splitting_mev,
        "direct_gap_meV": gap,
    }
    if not test.present:
        yield Flag(
            "time-reversal-broken",
            "warning" if conclude_nodes(findings).class_ else _worse_without_gap(findings),
            f"the Hamiltonian breaks time reversal by {mev(test.violation_mev)} in either spin "
            "order; Z2 indices do not exist for it.",
            evidence,
            "If the run was meant to be non-magnetic, converge it without moments; if it is "
            "magnetic, Chern numbers and inversion indicators apply instead.",
        )
    elif test.violation_mev > criteria.SYMMETRY_MEV:
        yield Flag(
            "time-reversal-broken",
            "error" if gap is not None and test.violation_mev >= gap else "info",
            f"time reversal holds on the mesh, but the Wigner-Seitz shifts break it by "
            f"{mev(test.violation_mev)} between mesh points.",
            evidence,
            "Equivalent centres differ by more than ws_distance_tol; a larger ws_distance_tol in "
            "the Wannier90 run removes this.",
        )


def _spin_orbit(findings: Findings) -> Iterator[Flag]:
    mixing = findings.time_reversal.spin_mixing_mev
    if not findings.spinful:
        yield Flag(
            "no-spin-orbit",
            _worse_without_gap(findings),
            "the Hamiltonian is spinless: it has no spin-orbit coupling and no Z2 indices.",
            {"spinors": False},
            "Repeat the first-principles run with spin-orbit coupling (spinors = true).",
        )
    elif mixing is not None and mixing < criteria.SPIN_MIXING_MEV:
        yield Flag(
            "no-spin-orbit",
            _worse_without_gap(findings),
            f"up and down are uncoupled and equal to {mixing:.2g} meV: the run had no spin-orbit "
            "coupling, and the indices are those of a Hamiltonian without it.",
            {"spin_mixing_meV": mixing},
            "Repeat the first-principles run with spin-orbit coupling (spinors = true).",
        )


def _worse_without_gap(findings: Findings) -> str:
    """A warning; where the gap closes as well, this may be why, and it comes before that."""
    closed = findings.gap is not None and findings.gap.status in ("gapless", "unresolved")
    return "error" if closed else "warning"


def _inversion(findings: Findings) -> Iterator[Flag]:
    test, gap = findings.inversion, findings.direct_gap_mev
    violation, at_trim = test.violation_mev, test.violation_trim_mev
    if violation is None or at_trim is None or violation <= criteria.SYMMETRY_MEV:
        return
    readable = findings.parity is None or findings.parity.status == "ok"
    beyond = findings.inversion_beyond_gap
    yield Flag(
        "symmetry-broken",
        "warning" if readable and not beyond else "error",
        f"the Hamiltonian breaks the inversion of its structure by {mev(violation)} between "
        f"mesh points and {mev(at_trim)} at the TRIM; "
        + _what_parities_mean(readable=readable, beyond=beyond),
        {
            "violation_meV": violation,
            "violation_trim_meV": at_trim,
            "violation_real_space_meV": test.violation_r_mev,
            "direct_gap_meV": gap,
        },
        "Read the Hamiltonian with its _wsvec.dat file (or centres and mp_grid); if that is done, "
        "check the declared projections, use some that respect the symmetry, and check the window.",
    )


def _what_parities_mean(*, readable: bool, beyond: bool) -> str:
    if not readable:
        return "either it lacks this symmetry or its orbitals are not the declared ones."
    if beyond:
        return (
            "the gap may close on the way to its inversion-symmetric average, to which the "
            "parities belong."
        )
    return "parities are those of its inversion-symmetric average, with no gap closing between."


def _group(findings: Findings) -> Iterator[Flag]:
    """Operations that the structure has and the Hamiltonian lacks; inversion has its own flag."""
    group = findings.group
    if group is None:
        return
    inversion = -np.eye(3, dtype=np.int64)
    lost = [
        test
        for test in group.operations
        if test.status in ("bands-only", "broken") and not np.array_equal(test.rotation, inversion)
    ]
    if not lost:
        return
    in_bands_only = all(test.status == "bands-only" for test in lost)
    worst = max(lost, key=lambda test: test.judged_mev or 0.0)
    yield Flag(
        "symmetry-broken",
        "info" if in_bands_only else "warning",
        group.sentence,
        {
            "operations_lost": [test.name for test in lost][:12],
            "worst_operation": worst.name,
            "worst_violation_meV": _nano(worst.judged_mev),
            "worst_band_shift_meV": _nano(worst.judged_shift_mev),
            "own_group": f"{group.own.symbol} ({group.own.number})",
        },
        "Symmetry-adapted Wannier functions or projections without localisation keep the group; "
        "--symmetrise shows what the verdict is with it restored."
        if in_bands_only
        else "Check that structure and Hamiltonian are of one run: strain, magnetism or another "
        "structure lower the group.",
    )


def _nano(value_mev: float | None) -> float | None:
    """To a nano-eV: what is below differs between machines and means nothing."""
    return None if value_mev is None else round(value_mev, 6)


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None
