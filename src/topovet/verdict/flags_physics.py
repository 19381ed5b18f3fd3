"""Flags from the physics: symmetry, electrons, gap, witnesses, and the error bar."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from topovet.invariants.parity import MIN_PURITY
from topovet.notation import mev
from topovet.symmetry.spacegroup import nearest_centre_distance
from topovet.verdict import criteria
from topovet.verdict.budget import error_budget, robustness_radius, total_error
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag


def symmetry_flags(findings: Findings) -> Iterator[Flag]:
    """Spin order, time reversal, spin-orbit coupling, inversion."""
    yield from _spin_order(findings)
    yield from _time_reversal(findings)
    yield from _spin_orbit(findings)
    yield from _inversion(findings)
    yield from _centre(findings)


def spectrum_flags(findings: Findings) -> Iterator[Flag]:
    """Filling, Fermi energy, gap, interpolation."""
    yield from _filling(findings)
    yield from _fermi(findings)
    yield from _gap(findings)
    yield from _interpolation(findings)


def witness_flags(findings: Findings) -> Iterator[Flag]:
    """Parity, and the error bar against the robustness radius."""
    yield from _parity(findings)
    yield from _error_bar(findings)


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
            "warning",
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
            "warning",
            "the Hamiltonian is spinless: it has no spin-orbit coupling and no Z2 indices.",
            {"spinors": False},
            "Repeat the first-principles run with spin-orbit coupling (spinors = true).",
        )
    elif mixing is not None and mixing < criteria.SPIN_MIXING_MEV:
        yield Flag(
            "no-spin-orbit",
            "warning",
            f"up and down are uncoupled and equal to {mixing:.2g} meV: the run had no spin-orbit "
            "coupling, and the indices are those of a Hamiltonian without it.",
            {"spin_mixing_meV": mixing},
            "Repeat the first-principles run with spin-orbit coupling (spinors = true).",
        )


def _inversion(findings: Findings) -> Iterator[Flag]:
    test, gap = findings.inversion, findings.direct_gap_mev
    violation, at_trim = test.violation_mev, test.violation_trim_mev
    if violation is None or at_trim is None or violation <= criteria.SYMMETRY_MEV:
        return
    readable = findings.parity is None or findings.parity.status == "ok"
    yield Flag(
        "symmetry-broken",
        "warning" if readable and not _inversion_beyond_gap(findings) else "error",
        f"the Hamiltonian breaks the inversion of its structure by {mev(violation)} between "
        f"mesh points and {mev(at_trim)} at the TRIM; "
        + (
            "the indices are those of its inversion-symmetric average."
            if readable
            else "either it lacks this symmetry or its orbitals are not the declared ones."
        ),
        {
            "violation_meV": violation,
            "violation_trim_meV": at_trim,
            "violation_real_space_meV": test.violation_r_mev,
            "direct_gap_meV": gap,
        },
        "Read the Hamiltonian with its _wsvec.dat file (or centres and mp_grid); if that is done, "
        "check the declared projections, use some that respect the symmetry, and check the window.",
    )


def _inversion_beyond_gap(findings: Findings) -> bool:
    """Whether H may lie beyond a gap closing from its symmetric average.

    The average is half of the violation away, so indices are safe while the violation is below the
    gap (Weyl). Shifts that are not available break inversion between mesh points only, which is an
    artefact of reading: there the TRIM, which are mesh points, decide.
    """
    test, gap = findings.inversion, findings.direct_gap_mev
    missing_shifts = findings.audit.shift_source == "not available"
    violation = test.violation_trim_mev if missing_shifts else test.violation_mev
    return gap is not None and violation is not None and violation >= gap


def _centre(findings: Findings) -> Iterator[Flag]:
    declared, group = findings.declared.settings.inversion_centre, findings.space_group
    if declared is None or group is None or not len(group.centres_frac):
        return
    distance = nearest_centre_distance(
        np.array(declared), group.centres_frac, findings.declared.crystal.cell
    )
    if distance <= 2 * group.symprec_ang:
        return
    nearest = ", ".join(f"{c:g}" for c in group.centres_frac[0])
    yield Flag(
        "inversion-centre-shifted",
        "error",
        f"the inversion centre in case.toml lies {distance:.3f} angstrom from the nearest one of "
        "the structure.",
        {"distance_ang": distance, "structure_centre": group.centres_frac[0].tolist()},
        f"Remove inversion_centre from case.toml, or set it to a centre such as [{nearest}].",
    )


def _filling(findings: Findings) -> Iterator[Flag]:
    electrons = findings.electrons
    if electrons is None:
        return
    odd = findings.kramers and electrons.filling % 2 == 1
    counted = electrons.mean_count
    off = counted is not None and (abs(counted - electrons.filling) >= criteria.FILLING_MISMATCH)
    if not odd and not off:
        return
    parts = []
    if odd:
        parts.append(f"filling {electrons.filling} is odd although bands come in Kramers pairs")
    if off:
        parts.append(
            f"the Fermi energy {electrons.fermi_ev:g} eV counts {counted:.2f} electrons, "
            f"{electrons.source} says {electrons.filling}"
        )
    yield Flag(
        "filling-off",
        "error",
        "; ".join(parts) + ".",
        {
            "filling": electrons.filling,
            "fermi_eV": electrons.fermi_ev,
            "mean_count_at_fermi": counted,
        },
        "Count the electrons of the Wannier manifold again: all valence electrons less two for "
        "each Kramers pair of excluded bands.",
    )


def _fermi(findings: Findings) -> Iterator[Flag]:
    electrons, gap = findings.electrons, findings.gap
    fermi = None if electrons is None else electrons.fermi_ev
    if fermi is None or gap is None or gap.status != "insulator":
        return
    below, above = gap.vbm_ev - fermi, fermi - gap.cbm_ev
    outside = max(below, above)
    if outside <= criteria.FERMI_OUTSIDE_EV:
        return
    side = (
        "below the valence-band maximum" if below > above else "above the conduction-band minimum"
    )
    yield Flag(
        "fermi-outside-gap",
        "warning",
        f"the Fermi energy {fermi:g} eV lies {1000 * outside:.0f} meV {side}.",
        {"fermi_eV": fermi, "vbm_eV": gap.vbm_ev, "cbm_eV": gap.cbm_ev},
        "Often only the highest level of a coarse mesh; check that filling and Fermi energy come "
        "from the same run. In a real crystal it would mean bulk carriers.",
    )


def _gap(findings: Findings) -> Iterator[Flag]:
    gap, electrons = findings.gap, findings.electrons
    if gap is None or electrons is None or gap.status not in ("gapless", "unresolved"):
        return
    yield Flag(
        "gap-closes",
        "error",
        f"the direct gap at filling {electrons.filling} comes down to "
        f"{1000 * gap.direct_ev:.2g} meV at k = ({', '.join(f'{c:.4f}' for c in gap.direct_k)}): "
        "no index of the occupied bands is defined, or it is too close to tell by sampling.",
        {"direct_gap_meV": 1000 * gap.direct_ev, "k": list(gap.direct_k)},
        "Check the filling; if it is right, the compound is a semimetal or lies at a transition.",
    )


def _interpolation(findings: Findings) -> Iterator[Flag]:
    check, gap = findings.interpolation, findings.direct_gap_mev
    if check is None:
        return
    mesh = check.mesh_occupied_mev
    if mesh is not None and mesh > criteria.MESH_ENERGY_MEV:
        yield Flag(
            "interpolation-poor",
            "error" if gap is not None and mesh >= 0.5 * gap else "warning",
            f"occupied energies on the mesh differ from the first-principles ones by up to "
            f"{mev(mesh)} ({check.mesh_points} points).",
            {"mesh_occupied_meV": mesh, "direct_gap_meV": gap},
            "Check that .eig and _hr.dat are of one run, and that the frozen window holds all "
            "occupied bands.",
        )
    mended = findings.shift_test is not None and findings.shift_test.adopted == "mended"
    path = check.path_occupied_mev
    if path is not None and path > criteria.PATH_ENERGY_MEV and not mended:
        # from the sites the bands come out differently, on average closer to first principles
        by_choice = findings.audit.shift_source == "rebuilt from declared sites"
        yield Flag(
            "interpolation-poor",
            "info" if by_choice else "warning",
            f"occupied bands differ from Wannier90's own interpolation by up to {mev(path)} "
            f"(Wigner-Seitz shifts here: {findings.audit.shift_source}).",
            {"path_occupied_meV": path, "path_all_meV": check.path_all_mev},
            "Give the _wsvec.dat file of the same run.",
        )


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


def _error_bar(findings: Findings) -> Iterator[Flag]:
    radius = robustness_radius(findings)
    if radius is None or findings.gap is None or findings.gap.status == "gapless":
        return
    budget = error_budget(findings)
    total = total_error(budget)
    if total < radius:
        return
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


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None
