"""Known errors of the input in meV, set against half of the direct gap.

By Weyl's inequality an error V(k) with |V(k)| < gap/2 everywhere, which keeps the protecting
symmetry, cannot change an index. A Hamiltonian that breaks a symmetry by |S H S^-1 - H| lies half
of that away from its own symmetric average, so half of a violation is what enters here.
"""

from __future__ import annotations

from topovet.verdict.findings import Findings


def error_budget(findings: Findings) -> dict[str, float | None]:
    """Each known error in meV; None where it was not measured.

    "range" is an estimate: what was cut off beyond the supercell of the mesh is taken to be as
    large as what stands at its rim. On the real cases it meets the largest error of the occupied
    bands between mesh points within a factor of two, but for Si, where the error is six times as
    large (`tests/real_data/test_decay_real.py`).
    """
    audit, inversion = findings.audit, findings.inversion
    return {
        "rounding": audit.rounding_mev,
        "hermiticity": 0.5 * audit.hermiticity_mev,
        "time_reversal": (
            0.5 * findings.time_reversal.violation_mev if findings.time_reversal.present else None
        ),
        "symmetry": None if inversion.violation_mev is None else 0.5 * inversion.violation_mev,
        "range": findings.decay.rim_mev,
        "interpolation": _interpolation(findings),
    }


def _interpolation(findings: Findings) -> float | None:
    """Filled energies against `.eig` on the mesh and against `_band.dat` between its points.

    The latter is no error where the shifts of Wannier90's own interpolation were mended or chosen
    otherwise on purpose.
    """
    check = findings.interpolation
    if check is None:
        return None
    path = check.path_occupied_mev if findings.same_shifts_as_bands else None
    known = [value for value in (check.mesh_occupied_mev, path) if value is not None]
    return max(known, default=None)


def total_error(budget: dict[str, float | None]) -> float:
    """Sum of the known errors, meV: the bound for errors that may all point one way."""
    return sum(value for value in budget.values() if value is not None)


def robustness_radius(findings: Findings) -> float | None:
    """Half of the proved direct gap, meV; of the attained one where none is proved."""
    proved = findings.proved_gap_mev
    gap = findings.direct_gap_mev if proved is None else proved
    return None if gap is None else 0.5 * gap
