"""Fermi arcs as they stand in `measurable`: where they end, how many, how long."""

from __future__ import annotations

from typing import Any

from topovet.boundary.arcs.results import Arc, ArcSurvey, LoopCount, Projection
from topovet.units import MEV_PER_EV


def arcs_block(arcs: ArcSurvey) -> dict[str, Any]:
    """Projections, what was counted around them, and the arcs that were followed."""
    loops = {loop.projection: loop for loop in arcs.loops}
    return {
        "status": arcs.status,
        "reason": arcs.reason,
        "chosen_by": arcs.chosen_by,
        "projections": [_projection(p, loops.get(i)) for i, p in enumerate(arcs.projections)],
        "arcs": [_arc(arc, arcs) for arc in arcs.arcs],
        "arcs_note": arcs.arcs_note,
        "assumptions": [
            "chirality_counted: net number of surface levels on a circle around the projection, of "
            "both half-crystals at two curves in the window of the bulk; at least as many arcs end "
            "there as its size, more only in pairs",
            "arcs_upper, arcs_lower: levels on that circle at the energy of the nodes; at another "
            "Fermi energy arcs end at the pockets around the projections",
            "lengths: at the energy of the nodes, straight within the circles; which projections "
            "an arc joins depends on the termination, and so does its course",
            "an ideal cut of the bulk Hamiltonian: no relaxation, no charge, band bending or "
            "adsorbates; one-particle levels of the Hamiltonian as given",
        ],
    }


def _projection(p: Projection, loop: LoopCount | None) -> dict[str, Any]:
    counted = loop is not None and loop.status == "ok"
    ends = None if loop is None else loop.ends
    note = "not counted: other projections came first" if loop is None else loop.reason
    return {
        "k_surface": list(p.k_par),
        "k_per_ang": list(p.k_ang),
        "nodes": list(p.nodes),
        "chirality_sum": p.chirality,
        "arcs_at_least": abs(p.chirality),
        "energy_eV": p.energy_ev,
        "energy_spread_meV": MEV_PER_EV * (p.energy_max_ev - p.energy_min_ev),
        "chirality_counted": loop.chirality if loop is not None and counted else None,
        "circle_per_ang": None if loop is None else loop.radius_ang,
        "arcs_upper": None if ends is None else ends[0],
        "arcs_lower": None if ends is None else ends[1],
        "note": note or ("" if loop is None else loop.ends_reason),
    }


def _arc(arc: Arc, arcs: ArcSurvey) -> dict[str, Any]:
    return {
        "termination": arcs.terminations[arc.side],
        "from": arc.start,
        "to": arc.end,
        "energy_eV": arc.energy_ev,
        "length_per_ang": arc.length_ang,
        "note": arc.reason,
    }
