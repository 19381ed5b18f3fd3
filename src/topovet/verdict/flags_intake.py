"""Flags from the files themselves: is the Hamiltonian whole, and is it read as it was meant?"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from topovet.arrays import FloatArray
from topovet.intake.audit_results import HamiltonianAudit
from topovet.model.cell_relation import CellRelation
from topovet.notation import mev
from topovet.verdict import criteria
from topovet.verdict.budget import robustness_radius
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag

BY_DIGITS = {
    "time-reversal-broken": "broken time reversal",
    "symmetry-broken": "broken inversion",
    "interpolation-poor": "wrong energies on the mesh",
}
"""What too few digits can bring about."""


def intake_flags(findings: Findings) -> Iterator[Flag]:
    """All flags of this kind that are raised, causes before what may follow from them."""
    yield from _digits(findings)
    yield from _hermiticity(findings)
    yield from _duplicates(findings)
    yield from _missing_partners(findings)
    yield from _structure(findings)
    yield from _range(findings)
    yield from _centres(findings)


def _digits(findings: Findings) -> Iterator[Flag]:
    """The digits of the file alone: too few for the gap, or for what was measured with them."""
    rounding, gap = findings.audit.rounding_mev, findings.gap
    radius = robustness_radius(findings)
    fatal = radius is not None and rounding >= radius
    if gap is not None and gap.status in ("gapless", "unresolved"):
        # the gap has a flag of its own, and the usual digits would not help
        fatal = rounding >= criteria.COARSE_DIGITS_MEV
    explained = tuple(explained_by_digits(findings).values())
    if not fatal and not explained:
        return
    yield Flag(
        "inside-error-bar",
        "error" if fatal else "warning",
        f"the printed digits of H(R) leave an error of up to {mev(rounding)}"
        + (f", the robustness radius is {mev(radius)}" if fatal and radius is not None else "")
        + (f"; this may be all that stands behind {' and '.join(explained)}" if explained else "")
        + ".",
        {"rounding_meV": rounding, "radius_meV": radius},
        "Write the Hamiltonian with all its digits (Wannier90 prints six decimals).",
    )


def explained_by_digits(findings: Findings) -> dict[str, str]:
    """Flag codes, in words, of violations that rounding allows: |S E S^-1 - E| <= 2 |E|."""
    rounding, check = findings.audit.rounding_mev, findings.interpolation
    mesh = None if check is None else check.mesh_occupied_mev
    measured = (
        ("time-reversal-broken", findings.time_reversal.violation_mev, criteria.SYMMETRY_MEV, 2),
        ("symmetry-broken", findings.inversion.violation_mev, criteria.SYMMETRY_MEV, 2),
        ("interpolation-poor", mesh, criteria.MESH_ENERGY_MEV, 1),
    )
    return {
        code: BY_DIGITS[code]
        for code, value, limit, factor in measured
        if value is not None and limit < value <= factor * rounding
    }


def _hermiticity(findings: Findings) -> Iterator[Flag]:
    violation = findings.audit.hermiticity_mev
    if violation <= criteria.HERMITICITY_MEV:
        return
    gap, reversal = findings.direct_gap_mev, findings.time_reversal
    fatal = gap is not None and violation >= gap
    # Damage E in one block moves the mean H(k) by at most |E|, and |S E S^-1 - E| <= 2 |E|.
    excuse = not reversal.present and reversal.violation_mev <= 2 * violation
    yield Flag(
        "not-hermitian",
        "error" if fatal or excuse else "warning",
        f"H(-R) differs from H(R)† by up to {mev(violation)}; their mean is used."
        + (
            f" This damage may be all that breaks time reversal, by {mev(reversal.violation_mev)}."
            if excuse
            else ""
        ),
        {"violation_meV": violation, "direct_gap_meV": gap},
        "Check that the file was not edited or mixed from two runs; write it again.",
    )


def _duplicates(findings: Findings) -> Iterator[Flag]:
    audit = findings.audit
    if not audit.duplicate_r:
        return
    cells = _cells(audit.duplicate_r)
    if audit.duplicates_identical:
        summary = f"R vectors are listed twice with equal blocks ({cells}); each counts once."
    else:
        summary = f"R vectors are listed twice with different blocks ({cells}); they were added."
    yield Flag(
        "duplicate-r",
        "warning" if audit.duplicates_identical else "error",
        summary,
        {"r_vectors": cells, "identical": audit.duplicates_identical},
        "Find out which block is meant, or write the file again.",
    )


def _missing_partners(findings: Findings) -> Iterator[Flag]:
    audit = findings.audit
    if not audit.n_missing_partner:
        return
    yield Flag(
        "missing-partner-r",
        "warning",
        f"{audit.n_missing_partner} R vectors are listed without -R "
        f"({_cells(audit.missing_partner_r)}), largest element there "
        f"{mev(audit.missing_partner_mev)}; the partner was supplied as H(R)†.",
        {"count": audit.n_missing_partner, "largest_meV": audit.missing_partner_mev},
        "The file has lost blocks; write it again from the Wannier90 run.",
    )


def _range(findings: Findings) -> Iterator[Flag]:
    audit = findings.audit
    points, total = audit.mesh_points, audit.degeneracy_sum
    missed = _missed_on_mesh_mev(findings)
    if points is None:
        return
    if abs(total - points) > 1e-6 and (_is_wigner_seitz(findings) or missed is not None):
        yield _wrong_number_of_r(findings, missed)
    elif total < points - 1e-6:
        yield Flag(
            "range-truncated",
            "warning",
            f"{audit.n_r} R vectors, each with degeneracy 1, stand for a mesh of {points} points: "
            "the list was cut, or written by another convention.",
            {"n_r": audit.n_r, "mesh_points": points},
            "Use the _hr.dat that Wannier90 wrote, with all R vectors.",
        )
    elif audit.n_zero_r and audit.weakest_block_mev > _cut_off_mev(audit):
        yield Flag(
            "range-truncated",
            "warning" if missed is None else "error",
            f"the blocks of {audit.n_zero_r} R vectors are zero to the last digit, while the "
            f"weakest other one holds {mev(audit.weakest_block_mev)}: they were cut off, not "
            "decayed"
            + ("." if missed is None else f", and energies on the mesh miss by {mev(missed)}."),
            {
                "n_zero_r": audit.n_zero_r,
                "weakest_block_meV": audit.weakest_block_mev,
                "mesh_occupied_meV": missed,
            },
            "Use the _hr.dat that Wannier90 wrote, without any cut-off.",
        )


def _cut_off_mev(audit: HamiltonianAudit) -> float:
    """What the weakest block must exceed for zero blocks beside it to have been cut off, meV."""
    return max(criteria.ZERO_BLOCK_MEV, criteria.ZERO_BLOCK_DIGITS * audit.last_digit_mev)


def _wrong_number_of_r(findings: Findings, missed_mev: float | None) -> Flag:
    audit = findings.audit
    evidence = (
        "not even the energies on the mesh are right"
        if missed_mev is None
        else f"the energies on the mesh are wrong by up to {mev(missed_mev)}"
    )
    return Flag(
        "range-truncated",
        "error",
        f"the degeneracies of the R vectors add up to {audit.degeneracy_sum:.3f}, not to the "
        f"{audit.mesh_points} points of the mesh: R vectors or their degeneracies are missing, or "
        f"the mesh is another one, so that {evidence}.",
        {
            "degeneracy_sum": audit.degeneracy_sum,
            "mesh_points": audit.mesh_points,
            "mesh_occupied_meV": missed_mev,
        },
        "Use the _hr.dat and the .win file of the same run, with all R vectors.",
    )


def _missed_on_mesh_mev(findings: Findings) -> float | None:
    """By how much the energies of the .eig file are missed; None where they are met or absent."""
    check = findings.interpolation
    missed = None if check is None else check.mesh_occupied_mev
    return missed if missed is not None and missed > criteria.MESH_ENERGY_MEV else None


def _is_wigner_seitz(findings: Findings) -> bool:
    """Degeneracies other than 1 are the mark of a list that Wannier90 made for a mesh."""
    return not findings.audit.all_degeneracies_one


def _centres(findings: Findings) -> Iterator[Flag]:
    test = findings.shift_test
    if test is None or not test.suspects:
        return
    offsets = findings.audit.centre_offsets_ang
    furthest = max((offsets[i] for i in test.suspects), default=0.0)
    misplaced = 2 * len(test.elsewhere) > len(test.suspects)
    if misplaced:
        yield Flag(
            "orbital-declaration-wrong",
            "error",
            f"{len(test.elsewhere)} Wannier functions ({_numbers(test.elsewhere)}) are centred on "
            "sites declared for other functions: the projections do not stand in the order of the "
            "Hamiltonian.",
            {"wannier_functions": [i + 1 for i in test.elsewhere]},
            "Take the .win file that the Hamiltonian was made with; Wannier90 orders projections "
            "by line, site, l, mr and spin.",
        )
        return
    home = "their declared sites" if findings.declared.orbitals else "the atoms left for them"
    yield Flag(
        "centres-off",
        "warning",
        f"the centres of {len(test.suspects)} Wannier functions ({_numbers(test.suspects)}) lie up "
        f"to {furthest:.2f} angstrom from {home}. {test.reason}",
        {
            "wannier_functions": [i + 1 for i in test.suspects],
            "largest_offset_ang": furthest,
            "inversion_residual_with_centres_meV": test.given_mev,
            "inversion_residual_with_sites_meV": test.mended_mev,
            "adopted": test.adopted,
        },
        "Run Wannier90 again with guiding_centres = true; bands that it interpolated with these "
        "centres are wrong between mesh points.",
    )


def _numbers(functions: tuple[int, ...]) -> str:
    shown = ", ".join(str(i + 1) for i in functions[:12])
    return shown + (", …" if len(functions) > 12 else "")


def _structure(findings: Findings) -> Iterator[Flag]:
    declared = findings.declared
    if declared.structure_cell is not None:
        yield _other_cell(findings, declared.structure_cell)
    offset = declared.structure_offset_ang
    if offset is not None and offset > criteria.SAME_ATOM_ANG:
        moved = "another composition" if np.isinf(offset) else f"atoms up to {offset:.2f} angstrom"
        yield Flag(
            "cell-mismatch",
            "warning",
            f"{declared.structure_file} has {moved} away from the atoms of {declared.win_file}; "
            f"the atoms of {declared.win_file} are used.",
            {"largest_offset_ang": None if np.isinf(offset) else offset},
            "Use the structure that the Wannier90 run was made with.",
        )


def _other_cell(findings: Findings, structure_cell: FloatArray) -> Flag:
    """A cell of the same lattice costs nothing; any other is another crystal."""
    declared = findings.declared
    relation = declared.structure_relation
    ours = np.linalg.norm(declared.crystal.cell, axis=1)
    theirs = np.linalg.norm(structure_cell, axis=1)
    related = relation is not None and relation.kind != "unrelated" and relation.larger != "second"
    return Flag(
        "cell-mismatch",
        "info" if related else "warning",
        f"the cell of {declared.structure_file} is not the Hamiltonian's: lengths "
        f"{_lengths(theirs)} against {_lengths(ours)} angstrom; {_relation(relation)}.",
        {
            "structure_ang": theirs.tolist(),
            "hamiltonian_ang": ours.tolist(),
            "relation": "unrelated" if relation is None else relation.kind,
            "matrix": None
            if relation is None or relation.matrix is None
            else relation.matrix.reshape(-1).tolist(),
        },
        "Nothing, if atoms and space group in this report are as expected."
        if related
        else "Give the structure in the cell of the Wannier90 run, or remove the file.",
    )


def _relation(relation: CellRelation | None) -> str:
    if relation is None or relation.kind == "unrelated":
        return "no integer matrix relates the two, and the Hamiltonian's is used"
    turned = ", turned," if relation.turned else ""
    if relation.kind == "supercell" and relation.larger == "first":
        return (
            f"it is a supercell{turned} of {relation.multiple} of the Hamiltonian's, in which its "
            "atoms are told"
        )
    if relation.kind == "supercell":
        return (
            f"the Hamiltonian's is a supercell{turned} of {relation.multiple} of it, and its own "
            "atoms are used"
        )
    return f"both{turned} span the same lattice, and the Hamiltonian's vectors are used"


def _cells(cells: tuple[tuple[int, int, int], ...]) -> str:
    shown = ", ".join("(" + " ".join(map(str, cell)) + ")" for cell in cells[:3])
    return shown + (", …" if len(cells) > 3 else "")


def _lengths(values: np.ndarray[tuple[int, ...], np.dtype[np.float64]]) -> str:
    return ", ".join(f"{v:.4f}" for v in values)
