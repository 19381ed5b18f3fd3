"""Flags from the declared orbitals, centre and origin, held against the Hamiltonian itself."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from topovet.notation import k_text, mev, z2_text
from topovet.symmetry.centre_search import CentreTrial
from topovet.symmetry.declaration_results import Correction, DeclarationCheck
from topovet.symmetry.spacegroup import nearest_centre_distance
from topovet.verdict import criteria
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag

KINDS = {
    "site-order": "they sit on other sites than declared",
    "line-order": "the projection lines, or the orbitals within them, are in another order",
    "spin-order": "spin is in another order",
    "orbital-order": "orbitals of one site are interchanged",
    "parity": "some are of the opposite parity, hence of another l",
}
"""What a correction of each kind says of the declared functions."""


def declaration_flags(findings: Findings) -> Iterator[Flag]:
    """Stated centre, common origin, then the orbitals."""
    yield from _stated_centre(findings)
    yield from _origin(findings)
    yield from _other_centre(findings)
    yield from _orbitals(findings)


def best_correction(check: DeclarationCheck) -> Correction | None:
    """The most plausible reading that mends the declared inversion; None where none does."""
    return check.corrections[0] if check.corrections else None


def moved_centre(check: DeclarationCheck) -> CentreTrial | None:
    """The point the Hamiltonian has inversion about, where that is no centre of the structure.

    None where a centre of the structure serves as well, where no inversion is found at all, or
    where it holds little better than the declared one: sites from scattered centres move as well.
    """
    good = [trial for trial in check.centres if trial.inferred.reliability == "good"]
    if not good or any(trial.in_structure for trial in good):
        return None
    residual = good[0].inferred.max_residual_mev
    limit = check.declared.worst_mev / criteria.INFERENCE_GAIN
    if good[0].shift_ang is None or residual is None or residual > limit:
        return None
    return good[0]


def holds_as_inferred(check: DeclarationCheck) -> bool:
    """Whether inversion holds far better as inferred than as declared."""
    if check.inferred.reliability != "good":
        return False
    limit = max(criteria.SYMMETRY_MEV, check.declared.worst_mev / criteria.INFERENCE_GAIN)
    return check.inferred_fit.worst_mev <= limit


def _stated_centre(findings: Findings) -> Iterator[Flag]:
    distance = _stated_distance(findings)
    if distance is None:
        return
    group = findings.space_group
    assert group is not None
    nearest = ", ".join(f"{c:g}" for c in group.centres_frac[0])
    yield Flag(
        "inversion-centre-shifted",
        "error",
        f"the inversion centre in case.toml lies {distance:.3f} angstrom from the nearest one of "
        "the structure.",
        {"distance_ang": distance, "structure_centre": group.centres_frac[0].tolist()},
        f"Remove inversion_centre from case.toml, or set it to a centre such as [{nearest}].",
    )


def _stated_distance(findings: Findings) -> float | None:
    """How far the centre of case.toml is off, angstrom; None where it is not off or not stated."""
    declared, group = findings.declared.settings.inversion_centre, findings.space_group
    if declared is None or group is None or not len(group.centres_frac):
        return None
    cell = findings.declared.crystal.cell
    distance = nearest_centre_distance(np.array(declared), group.centres_frac, cell)
    return distance if distance > 2 * group.symprec_ang else None


def _origin(findings: Findings) -> Iterator[Flag]:
    """All centres off by one vector: structure and Hamiltonian are told from two origins.

    In a crystal with inversion the mean offset of the centres vanishes, so that a common one is no
    physical displacement.
    """
    test, group = findings.shift_test, findings.space_group
    if test is None or test.origin_shift_frac is None or group is None:
        return
    if not len(group.centres_frac):
        return
    shift = np.array(test.origin_shift_frac)
    length = float(np.linalg.norm(shift @ findings.declared.crystal.cell))
    yield Flag(
        "inversion-centre-shifted",
        "warning",
        f"all Wannier centres lie {length:.2f} angstrom from their declared sites, by one and the "
        f"same vector {k_text(test.origin_shift_frac)}: structure and Hamiltonian are told from "
        "two origins. Relative positions agree, and nothing else enters the indices.",
        {"shift_frac": list(test.origin_shift_frac), "shift_ang": length},
        "Give the structure that the Wannier90 run was made with.",
    )


def _other_centre(findings: Findings) -> Iterator[Flag]:
    """The Hamiltonian has inversion, but about a point that is no centre of the structure."""
    check = findings.declaration
    if check is None or _stated_distance(findings) is not None:
        return
    trial, correction = moved_centre(check), best_correction(check)
    if correction is not None and correction.reading.kind == "centre":
        centre, after = correction.centre_frac, correction.fit.worst_mev
        distance = None
    elif trial is not None and correction is None:
        x, y, z = (float(c) for c in trial.inferred.centre_frac)
        centre, after = (x, y, z), trial.inferred.max_residual_mev or 0.0
        distance = trial.shift_ang
    else:
        return
    yield Flag(
        "inversion-centre-shifted",
        "error",
        f"about {k_text(check.centre_frac.tolist())}, the centre of the structure, "
        f"{_missing(check)}; about {k_text(centre)} it holds to {mev(after)}.",
        {
            "residual_before_meV": _finite(check.declared.worst_mev),
            "residual_after_meV": after,
            "centre": list(centre),
            "distance_ang": distance,
        },
        "Check that structure and Hamiltonian share one origin, or set inversion_centre in "
        "case.toml.",
    )


def _orbitals(findings: Findings) -> Iterator[Flag]:
    """Inversion as declared against inversion as the Hamiltonian itself has it."""
    check = findings.declaration
    if check is None or _stated_distance(findings) is not None:
        return
    correction = best_correction(check)
    if correction is not None and correction.reading.kind == "centre":
        return
    if correction is None and not holds_as_inferred(check):
        return
    mended, z2 = findings.inferred_parity, None
    if mended is not None and mended.status == "ok" and not check.rehomed:
        z2 = mended.z2
    beside = "" if z2 is None else f" On that reading parities give Z2 = {z2_text(z2)}."
    functions = [n + 1 for n in _functions(check, correction)]
    after = check.inferred_fit.worst_mev if correction is None else correction.fit.worst_mev
    yield Flag(
        "orbital-declaration-wrong",
        "error",
        f"with the declared orbitals {_missing(check)}; {_explained(check, correction)}, it holds "
        f"to {mev(after)}.{beside}",
        {
            "residual_before_meV": _finite(check.declared.worst_mev),
            "residual_after_meV": after,
            "correction": "inferred" if correction is None else correction.reading.kind,
            "wannier_functions": functions[:12],
            "other_readings_as_good": max(0, _n_as_good(check) - 1),
            "eigenvalue_ratio": check.inferred.eigenvalue_ratio,
            "z2_if_inferred": None if z2 is None else list(z2),
        },
        "Take the projections of the run that made the Hamiltonian, or remove the projections "
        "block: inversion is then inferred.",
    )


def _missing(check: DeclarationCheck) -> str:
    if np.isfinite(check.declared.worst_mev):
        return f"inversion misses by {mev(check.declared.worst_mev)}"
    return f"inversion cannot be built ({check.declared.reason})"


def _explained(check: DeclarationCheck, correction: Correction | None) -> str:
    functions = _functions(check, correction)
    named = f"Wannier functions {_numbers(functions)}" if functions else "the functions"
    if correction is None and check.rehomed:
        moved = _numbers(check.rehomed)
        return f"with Wannier functions {moved} in other cells than declared, as hoppings say"
    if correction is None:
        return f"inferred from the Hamiltonian itself, which disagrees on {named}"
    return f"read so that for {named} {KINDS[correction.reading.kind]}"


def _functions(check: DeclarationCheck, correction: Correction | None) -> tuple[int, ...]:
    """Functions that a correction changes, or on which declaration and Hamiltonian disagree."""
    if correction is None:
        return check.rehomed or check.disagreeing
    order = correction.reading.order or ()
    moved = {n for n, i in enumerate(order) if i != n}
    return tuple(sorted(moved | set(correction.reading.flipped)))


def _n_as_good(check: DeclarationCheck) -> int:
    """Readings whose residual is that of the best one but for rounding."""
    if not check.corrections:
        return 0
    best = check.corrections[0].fit.worst_mev
    return sum(c.fit.worst_mev <= 1.1 * best + 1e-3 for c in check.corrections)


def _numbers(functions: tuple[int, ...]) -> str:
    shown = ", ".join(str(i + 1) for i in functions[:8])
    return shown + (", …" if len(functions) > 8 else "")


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None
