"""What an experiment could look for: every number an estimate with its assumptions beside it.

Only where the verdict stands behind a class that asks for surface or edge states, and these were
followed. Keys carry their units, as everywhere in the verdict.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from topovet.boundary.cone_results import (
    Cone,
    EdgeCrossing,
    KramersPair,
    SurfaceStates,
    Warping,
)
from topovet.boundary.observables import velocity_m_s
from topovet.boundary.surface_states import same_pair
from topovet.spectrum.results import GapSample
from topovet.units import KT_ROOM_MEV, MEV_PER_EV
from topovet.verdict.budget import error_budget, robustness_radius, total_error
from topovet.verdict.conclude import Conclusion
from topovet.verdict.findings import Findings
from topovet.verdict.measurable_arcs import arcs_block
from topovet.verdict.measurable_transport import (
    landau_block,
    oscillation_block,
    surface_channel_block,
)
from topovet.verdict.semimetal import conclude_nodes

IDEAL_SURFACE = (
    "an ideal cut of the bulk Hamiltonian: no relaxation, no charge, band bending or adsorbates"
)
ONE_PARTICLE = "one-particle levels of the Hamiltonian as given; its functional's gap is taken over"

WARPED = {
    "both": "fitted to both bands",
    "upper": "fitted to the band above the Dirac point; the mean of the two is taken for isotropic",
    "lower": "fitted to the band below the Dirac point; the mean of the two is taken for isotropic",
}
"""What was fitted for the warping."""

NOTES = {
    "trivial": "No surface or edge state is demanded by these indices.",
    "crystalline-ti": "Surfaces that keep a mirror with a nonzero mirror Chern number carry so "
    "many cones on its line; their energies are not computed.",
    "higher-order": "States are expected at hinges or corners; their energies are not computed.",
    "axion-candidate": "Half-quantised surface Hall conductance; nothing is computed for it.",
    "dirac-semimetal": "Surface states at nodes are not computed.",
    "nodal-line": "Drumhead states inside the projected line are not computed.",
}
"""What is said of classes whose surface is not followed."""


def measurable(findings: Findings, conclusion: Conclusion) -> dict[str, Any]:
    """The entry `measurable` of the verdict; empty where the verdict is open.

    Parameters
    ----------
    findings
        Results of all steps.
    conclusion
        The class that is stood behind.
    """
    class_, states, gap = conclusion.class_, findings.surface_states, findings.gap
    if class_ in ("undetermined", "metal") or gap is None:
        return {}
    if class_ == "weyl-semimetal":
        return _arcs(findings)
    if class_ not in ("strong-ti", "weak-ti", "chern"):
        return {"note": NOTES[class_]} if class_ in NOTES else {}
    if states is None:
        why = findings.missing.get("surface-states", "the surface was not followed")
        return {"note": f"Not computed: {why}."}
    planar = findings.declared.crystal.dimension == 2
    return {
        "estimate": True,
        "uncertainty": _uncertainty(findings, robustness_radius(findings)),
        **(_edge(findings, conclusion, states, gap) if planar else _surface(findings, states, gap)),
    }


def _arcs(findings: Findings) -> dict[str, Any]:
    """A Weyl semimetal: where its arcs end on one surface."""
    arcs, barrier = findings.arcs, conclude_nodes(findings).barrier_ev
    if arcs is None:
        why = findings.missing.get("fermi-arcs", "they were not followed")
        return {"note": f"Fermi arcs join the projections of nodes; not computed: {why}."}
    survives = None if barrier is None else 0.5 * MEV_PER_EV * barrier
    return {
        "estimate": True,
        "uncertainty": _uncertainty(findings, survives),
        "surface": {"miller": list(arcs.miller), "terminations": list(arcs.terminations)},
        "fermi_arcs": arcs_block(arcs),
    }


def _uncertainty(findings: Findings, survives_mev: float | None) -> dict[str, Any]:
    known = total_error(error_budget(findings))
    return {
        "energy_meV": known,
        "verdict_survives_meV": survives_mev,
        "assumptions": [
            "the known errors of the input, added up: no level moves by more (Weyl), a gap by at "
            "most twice as much",
            "errors of the functional are not among them",
        ],
    }


def _surface(findings: Findings, states: SurfaceStates, gap: GapSample) -> dict[str, Any]:
    surface = findings.surface
    assert surface is not None
    entry: dict[str, Any] = {
        "surface": {"miller": list(surface.miller), "terminations": list(states.terminations)},
        "kramers_pairs": [_pair(pair, states, gap) for pair in states.pairs],
        "dirac_point": _dirac_point(states, gap, _room_mev(findings, gap)),
    }
    if surface.instead_of is not None:
        likeliest = " ".join(map(str, surface.instead_of))
        entry["dirac_point"]["assumptions"].append(
            f"not on the likeliest cleavage plane, ({likeliest}), whose levels are not settled"
        )
    if not states.cones:
        return entry
    cone = states.cones[0]
    error_ev = total_error(error_budget(findings)) / MEV_PER_EV
    fermi = None if findings.electrons is None else findings.electrons.fermi_ev
    return {
        **entry,
        "surface_band": _band(cone, states),
        "oscillation": oscillation_block(cone, gap),
        **landau_block(cone),
        "surface_channel": surface_channel_block(cone, gap, error_ev),
        "doping": _doping(cone, gap, fermi),
        "films": _films(states),
    }


def _room_mev(findings: Findings, gap: GapSample) -> float:
    """How far the distance of a level from a bulk edge may be off: known errors, unproved edges."""
    proved = findings.proved_indirect_ev
    attained = gap.cbm_ev - gap.vbm_ev
    unproved = 0.0 if proved is None else max(0.0, attained - proved)
    return total_error(error_budget(findings)) + MEV_PER_EV * unproved


def _exposure_mev(energy_ev: float, gap: GapSample) -> float:
    return MEV_PER_EV * min(energy_ev - gap.vbm_ev, gap.cbm_ev - energy_ev)


def _pair(pair: KramersPair, states: SurfaceStates, gap: GapSample) -> dict[str, Any]:
    own = min(pair.energy_ev - pair.window_low_ev, pair.window_high_ev - pair.energy_ev)
    return {
        "termination": states.terminations[pair.side],
        "k_surface": list(pair.k_par),
        "energy_eV": pair.energy_ev,
        "exposure_meV": _exposure_mev(pair.energy_ev, gap),
        "exposure_at_its_k_meV": MEV_PER_EV * own,
    }


def _dirac_point(states: SurfaceStates, gap: GapSample, error_mev: float) -> dict[str, Any]:
    """The pair that was followed, or that there is none in the window."""
    if not states.cones:
        buried = bool(states.buried)
        return {
            "status": "buried" if buried else "not-found",
            "exposure_meV": 0.0 if buried else None,
            "assumptions": [
                "levels must pass the momenta where an odd line ends, and none is found in the "
                "window there: the crossing lies among bulk states, how deep is not computed"
                if buried
                else "no band could be followed from a pair in the window",
                IDEAL_SURFACE,
            ],
        }
    pair = states.cones[0].pair
    others = [p for p in states.pairs if p.side == 1 and same_pair(p, pair)]
    several = len({p.k_par for p in states.pairs}) > 1
    exposure = _exposure_mev(pair.energy_ev, gap)
    return {
        "status": "exposed" if exposure > 0 else "buried",
        "beyond_known_errors": abs(exposure) > error_mev,
        **_pair(pair, states, gap),
        "above_valence_edge_meV": MEV_PER_EV * (pair.energy_ev - gap.vbm_ev),
        "below_conduction_edge_meV": MEV_PER_EV * (gap.cbm_ev - pair.energy_ev),
        "same_on_both_terminations": pair.side == 0 and bool(others),
        "assumptions": [
            "exposure_meV is the distance from the bulk band edges anywhere in the zone, negative "
            "beyond them; at its own k the pair lies in the window of the projected bands",
            "band edges are attained values; beyond_known_errors: whether the known errors of the "
            "input, and what the proved indirect gap leaves open, are too small to change its sign",
            *(
                ["pairs lie at several momenta: the one farthest from bulk states is followed"]
                if several
                else []
            ),
            IDEAL_SURFACE,
            ONE_PARTICLE,
        ],
    }


def _band(cone: Cone, states: SurfaceStates) -> dict[str, Any]:
    """Velocity, curvature, warping, reach and spin of the band."""
    speeds = [velocity_m_s(v) for v in cone.velocity_ev_ang]
    spin = [c for c in cone.contours if c.spin is not None]
    above = [c for c in spin if c.energy_ev > cone.pair.energy_ev]
    turn, turned = None, None
    if above or spin:
        chosen = (above or spin)[0]
        assert chosen.spin is not None
        along = float(chosen.spin[:, 1].mean()) * (1 if above else -1)
        turn = "counter-clockwise" if along > 0 else "clockwise"
        turned = abs(along)
    return {
        "termination": states.terminations[cone.pair.side],
        "velocity_m_s": float(np.mean(speeds)),
        "velocity_min_m_s": min(speeds),
        "velocity_max_m_s": max(speeds),
        "velocity_of_fit_m_s": (
            velocity_m_s(cone.velocity_spread_ev_ang)
            if math.isfinite(cone.velocity_spread_ev_ang)
            else None
        ),
        "velocity_eV_ang": float(np.mean(cone.velocity_ev_ang)),
        "curvature_eV_ang2": float(np.mean(cone.curvature_ev_ang2)),
        **_warping(cone.warping),
        "decay_length_ang": cone.decay_ang,
        "spin_above_dirac_point": turn,
        "spin_along_contour": turned,
        "assumptions": [
            "velocity: slope at the Dirac point, E = E_D + b k^2 +- (v k + c k^3) fitted to both "
            "bands; the velocity at other energies stands with the oscillation frequencies",
            "velocity_of_fit_m_s: how far it moves when the fit takes one point less",
            "warping: difference of the bands between and in the mirror planes; range: what single "
            "radii say; unevenness: difference of directions that the threefold axis relates",
            "decay length: of the amplitude, the slowest decaying bulk wave at the Dirac point",
            "spin: of the outermost lattice plane, seen from outside, expectation of sigma from 0 "
            "to 1; Wannier functions are taken for eigenstates of spin",
        ],
    }


def _warping(warping: Warping) -> dict[str, Any]:
    """lambda with the range of single radii and what the fit misses; or why there is none."""
    known = warping.lambda_ev_ang3 is not None
    misfit, uneven = warping.misfit_ev, warping.uneven_ev
    return {
        "warping_eV_ang3": warping.lambda_ev_ang3,
        "warping_range_eV_ang3": [warping.least_ev_ang3, warping.most_ev_ang3] if known else None,
        "warping_misfit_meV": None if misfit is None else MEV_PER_EV * misfit,
        "warping_unevenness_meV": None if uneven is None else MEV_PER_EV * uneven,
        "warping_reach_per_ang": warping.reach_ang,
        "warping_note": warping.reason if not known else WARPED[warping.band],
    }


def _doping(cone: Cone, gap: GapSample, fermi_ev: float | None) -> dict[str, Any]:
    """The window to aim at, and which way from the Fermi energy of the input."""
    window = gap.cbm_ev > gap.vbm_ev
    dirac = cone.pair.energy_ev
    exposed = gap.vbm_ev < dirac < gap.cbm_ev
    if not window:
        advice = "the bulk bands overlap: carriers of the bulk stay at any doping"
    elif exposed:
        advice = (
            "aim between the bulk edges; electrons of the surface above the Dirac point, holes "
            "below it"
        )
    elif dirac <= gap.vbm_ev:
        advice = "aim between the bulk edges; the surface has electrons there, no Dirac point"
    else:
        advice = "aim between the bulk edges; the surface has holes there, no Dirac point"
    side, distance = "", None
    if window and fermi_ev is not None:
        distance = MEV_PER_EV * max(gap.vbm_ev - fermi_ev, fermi_ev - gap.cbm_ev, 0.0)
        side = "none"
        if distance > 0:
            side = "donors" if fermi_ev < gap.vbm_ev else "acceptors"
    return {
        "aim_from_eV": gap.vbm_ev if window else None,
        "aim_to_eV": gap.cbm_ev if window else None,
        "dirac_point_in_aim": exposed and window,
        "needs": side or None,
        "distance_meV": distance,
        "advice": advice,
        "assumptions": [
            "needs: what brings the Fermi energy of the input into that window; that energy is the "
            "calculation's, real crystals are doped by their own defects"
        ],
    }


def _films(states: SurfaceStates) -> dict[str, Any] | None:
    """Hybridisation gap against thickness."""
    films = states.films
    if films is None:
        return {"note": states.film_note} if states.film_note else None
    gaps = np.array(films.gap_ev)
    rises = [i for i in range(1, len(gaps)) if gaps[i] > gaps[i - 1]]
    return {
        "thickness_nm": [t / 10 for t in films.thickness_ang],
        "gap_meV": [MEV_PER_EV * g for g in films.gap_ev],
        "thickness_for_1_meV_nm": _thinnest(films.thickness_ang, gaps, 1e-3),
        "monotonic": not rises,
        "assumptions": [
            "free-standing films of whole lattice planes, both faces alike, no substrate, no field",
            "gap between the bands at the momentum of the Dirac point"
            + ("; it does not fall steadily, as where it changes sign" if rises else ""),
            IDEAL_SURFACE,
        ],
    }


def _thinnest(thickness_ang: Sequence[float], gaps: Any, below_ev: float) -> float | None:
    """Thickness from which on all gaps are below, nm."""
    above = np.flatnonzero(np.asarray(gaps) >= below_ev)
    first = 0 if not len(above) else int(above[-1]) + 1
    return None if first >= len(thickness_ang) else thickness_ang[first] / 10


def _edge(
    findings: Findings, conclusion: Conclusion, states: SurfaceStates, gap: GapSample
) -> dict[str, Any]:
    """A two-dimensional crystal: conductance of its edges, their velocity and reach."""
    chern = conclusion.invariants.chern
    helical = conclusion.class_ != "chern"
    channels = 1 if helical else abs(chern) if isinstance(chern, int) else None
    insulating = gap.cbm_ev > gap.vbm_ev
    gap_mev = MEV_PER_EV * (gap.cbm_ev - gap.vbm_ev)
    surface = findings.surface
    pairs = [_pair(pair, states, gap) for pair in states.pairs]
    best = max(states.pairs, key=lambda p: round(_exposure_mev(p.energy_ev, gap)), default=None)
    entry: dict[str, Any] = {
        "surface": {
            "miller": [] if surface is None else list(surface.miller),
            "terminations": list(states.terminations),
        },
        "kramers_pairs": pairs,
        "edge": {
            "kind": "helical" if helical else "chiral",
            "conductance_e2_h": (
                None
                if channels is None or not insulating
                else 2 * channels
                if helical
                else channels
            ),
            "gap_meV": gap_mev,
            "gap_over_kT_300_K": gap_mev / KT_ROOM_MEV,
            "crossings": [_crossing(c, states) for c in states.crossings],
            "assumptions": [
                (
                    "two terminals, both edges, no backscattering as long as time reversal holds; "
                    "inelastic scattering lowers it in long edges"
                    if helical
                    else "Hall conductance at a Fermi energy in the gap, one sign of the field"
                ),
                "further crossings come in pairs, which disorder can localise",
                "decay length: of the amplitude, the slowest decaying bulk wave at that energy; "
                "ribbons should be many times as wide",
                IDEAL_SURFACE,
            ],
        },
    }
    if best is not None:
        entry["dirac_point"] = {
            "status": "exposed" if _exposure_mev(best.energy_ev, gap) > 0 else "buried",
            **_pair(best, states, gap),
            "assumptions": [
                "the pair farthest from bulk states; exposure_meV as distance from the bulk edges",
                IDEAL_SURFACE,
            ],
        }
    return entry


def _crossing(crossing: EdgeCrossing, states: SurfaceStates) -> Mapping[str, Any]:
    return {
        "termination": states.terminations[crossing.side],
        "k_edge": crossing.k_edge,
        "energy_eV": crossing.energy_ev,
        "velocity_m_s": velocity_m_s(crossing.velocity_ev_ang),
        "decay_length_ang": crossing.decay_ang,
    }
