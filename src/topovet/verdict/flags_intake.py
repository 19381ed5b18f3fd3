"""Flags from the files themselves: is the Hamiltonian whole, and is it read as it was meant?"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from topovet.notation import mev
from topovet.verdict import criteria
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag


def intake_flags(findings: Findings) -> Iterator[Flag]:
    """All flags of this kind that are raised."""
    yield from _hermiticity(findings)
    yield from _duplicates(findings)
    yield from _missing_partners(findings)
    yield from _range(findings)
    yield from _centres(findings)
    yield from _structure(findings)


def _hermiticity(findings: Findings) -> Iterator[Flag]:
    violation = findings.audit.hermiticity_mev
    if violation <= criteria.HERMITICITY_MEV:
        return
    gap = findings.direct_gap_mev
    fatal = gap is not None and violation >= gap
    yield Flag(
        "not-hermitian",
        "error" if fatal else "warning",
        f"H(-R) differs from H(R)† by up to {mev(violation)}; their mean is used.",
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
    audit, decay = findings.audit, findings.decay
    points, total = audit.mesh_points, audit.degeneracy_sum
    if points is not None and abs(total - points) > 1e-6 and _is_wigner_seitz(findings):
        yield Flag(
            "range-truncated",
            "error",
            f"the degeneracies of the R vectors add up to {total:.3f}, not to the {points} points "
            "of the mesh: R vectors are missing or the mesh is another one, so that not even the "
            "energies on the mesh are right.",
            {"degeneracy_sum": total, "mesh_points": points},
            "Use the _hr.dat and the .win file of the same run, with all R vectors.",
        )
    elif points is not None and total < points - 1e-6:
        yield Flag(
            "range-truncated",
            "warning",
            f"{audit.n_r} R vectors, each with degeneracy 1, stand for a mesh of {points} points: "
            "the list was cut, or written by another convention.",
            {"n_r": audit.n_r, "mesh_points": points},
            "Use the _hr.dat that Wannier90 wrote, with all R vectors.",
        )
    elif decay.rim_mev is not None and decay.rim_mev > (
        criteria.RIM_RATIO * decay.largest_hopping_mev
    ):
        yield Flag(
            "range-truncated",
            "warning",
            f"hoppings of {mev(decay.rim_mev)} remain beyond {decay.rim_ang:.1f} angstrom, at "
            "the rim of the supercell of the mesh: interpolated bands carry errors of that size.",
            {"rim_meV": decay.rim_mev, "largest_hopping_meV": decay.largest_hopping_mev},
            "Repeat the Wannier90 run on a denser mesh and compare.",
        )


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
    yield Flag(
        "centres-off",
        "warning",
        f"the centres of {len(test.suspects)} Wannier functions ({_numbers(test.suspects)}) lie up "
        f"to {furthest:.2f} angstrom from their declared sites. {test.reason}",
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
        ours = np.linalg.norm(declared.crystal.cell, axis=1)
        theirs = np.linalg.norm(declared.structure_cell, axis=1)
        yield Flag(
            "cell-mismatch",
            "warning",
            f"the cell of {declared.structure_file} is not the Hamiltonian's: lengths "
            f"{_lengths(theirs)} against {_lengths(ours)} angstrom; the Hamiltonian's is used.",
            {"structure_ang": theirs.tolist(), "hamiltonian_ang": ours.tolist()},
            "Give the structure in the cell of the Wannier90 run, or remove the file.",
        )
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


def _cells(cells: tuple[tuple[int, int, int], ...]) -> str:
    shown = ", ".join("(" + " ".join(map(str, cell)) + ")" for cell in cells[:3])
    return shown + (", …" if len(cells) > 3 else "")


def _lengths(values: np.ndarray[tuple[int, ...], np.dtype[np.float64]]) -> str:
    return ", ".join(f"{v:.4f}" for v in values)
