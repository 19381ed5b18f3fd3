"""Flags from the spectrum: filling, Fermi energy, gap, interpolation."""

from __future__ import annotations

from collections.abc import Iterator

from topovet.invariants.band_reps.results import NOT_GAPPED
from topovet.notation import mev
from topovet.verdict import criteria
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.semimetal import conclude_nodes, describe


def spectrum_flags(findings: Findings) -> Iterator[Flag]:
    """Filling, Fermi energy, gap, interpolation; what is measured before what is estimated."""
    yield from _filling(findings)
    yield from _fermi(findings)
    yield from _gap(findings)
    yield from _enforced_crossing(findings)
    yield from _interpolation(findings)
    yield from _rim(findings)


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
    at_filling = (
        f"the direct gap at filling {electrons.filling} comes down to "
        f"{1000 * gap.direct_ev:.2g} meV at k = ({', '.join(f'{c:.4f}' for c in gap.direct_k)})"
    )
    evidence: dict[str, float | int | str | bool | list[float] | None] = {
        "direct_gap_meV": 1000 * gap.direct_ev,
        "k": list(gap.direct_k),
    }
    found, nodes = conclude_nodes(findings), findings.nodes
    if nodes is not None:
        evidence |= {
            "points": len(nodes.points),
            "lines": sum(line.n_images for line in nodes.lines),
            "complete": nodes.complete,
            "chirality_sum": nodes.charge_sum,
            "gap_elsewhere_meV": 1000 * nodes.elsewhere_ev,
        }
    if found.class_ and nodes is not None:
        yield Flag(
            "gap-closes",
            "warning",
            f"{at_filling}: {describe(nodes)}. No index of the filled bands is defined.",
            evidence,
            "Check the filling and the energies of the nodes: the class is that of this filling.",
        )
        return
    located = ""
    if nodes is not None:
        listed = f"{describe(nodes)}; " if nodes.points or nodes.lines else ""
        located = f" ({listed}{found.grounds[0]})"
    yield Flag(
        "gap-closes",
        "error",
        f"{at_filling}: no index of the occupied bands is defined, or it is too close to tell by "
        f"sampling{located}.",
        evidence,
        "Check the filling; if it is right, the compound is a semimetal or lies at a transition.",
    )


def _enforced_crossing(findings: Findings) -> Iterator[Flag]:
    """Levels that cannot be connected where sampling saw a gap."""
    levels, gap = findings.band_reps, findings.gap
    if levels is None or gap is None or gap.status in ("gapless", "unresolved"):
        return
    if levels.occupied.classification != NOT_GAPPED:
        return
    shown = "; ".join(levels.occupied.crossings[:2])
    yield Flag(
        "gap-closes",
        "error",
        f"sampling found a direct gap of {mev(1000 * gap.direct_ev)}, but the levels at the k of "
        f"highest symmetry cannot be connected without a crossing ({shown}).",
        {"direct_gap_meV": 1000 * gap.direct_ev, "crossings": list(levels.occupied.crossings)},
        "Follow the gap along the lines named; if it stays open there, an operation is not what "
        "it is taken for: check the declared orbitals.",
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


def _rim(findings: Findings) -> Iterator[Flag]:
    decay = findings.decay
    if decay.rim_mev is None or decay.rim_mev <= criteria.RIM_RATIO * decay.largest_hopping_mev:
        return
    yield Flag(
        "range-truncated",
        "warning",
        f"hoppings of {mev(decay.rim_mev)} remain beyond {decay.rim_ang:.1f} angstrom, at the rim "
        "of the supercell of the mesh: interpolated bands carry errors of that size.",
        {"rim_meV": decay.rim_mev, "largest_hopping_meV": decay.largest_hopping_mev},
        "Repeat the Wannier90 run on a denser mesh and compare.",
    )
