"""Nodes and nodal lines as they stand in `verdict.json`."""

from __future__ import annotations

import numpy as np

from topovet.invariants.nodes.results import NodalLine, NodeSearch, PointNode
from topovet.units import METRE_PER_SECOND
from topovet.verdict.document import NodeEntry, NodeSearchEntry

PATH_POINTS = 60
"""Points of a line that are written, at most."""


def node_entries(nodes: NodeSearch | None) -> tuple[NodeEntry, ...] | None:
    """Points, then lines; None where no nodes were looked for."""
    if nodes is None:
        return None
    points = tuple(_point(p, nodes) for p in nodes.points)
    return points + tuple(_line(line, i, nodes) for i, line in enumerate(nodes.lines))


def search_entry(nodes: NodeSearch | None) -> NodeSearchEntry | None:
    """How complete they are; None where none were looked for."""
    if nodes is None:
        return None
    return NodeSearchEntry(
        complete=nodes.complete,
        reason=nodes.reason,
        gap_elsewhere_meV=1000 * nodes.elsewhere_ev,
        chirality_sum=nodes.charge_sum,
        fermi_eV=nodes.reference.energy_ev,
        fermi=nodes.reference.source,
        unexplained=tuple(p.k for p in nodes.pockets),
    )


def _point(p: PointNode, nodes: NodeSearch) -> NodeEntry:
    return NodeEntry(
        kind=p.kind,
        k=p.k,
        k_cart=p.k_cart,
        energy_eV=p.energy_ev,
        from_fermi_eV=p.from_reference_ev,
        multiplicity=p.multiplicity,
        chirality=p.charge,
        berry_phase_pi=p.berry_phase_pi,
        velocities_eV_ang=p.velocities,
        velocities_m_s=tuple(METRE_PER_SECOND * v for v in p.velocities),
        type=p.type,
        tilt=p.tilt,
        protection=p.protection,
        gap_around_meV=1000 * p.surface_gap_ev,
        orbit=p.orbit,
        images=sum(other.orbit == p.orbit for other in nodes.points),
    )


def _line(line: NodalLine, number: int, nodes: NodeSearch) -> NodeEntry:
    n_orbits = len({p.orbit for p in nodes.points})
    step = -(-len(line.k_frac) // PATH_POINTS)
    path = np.round(line.k_frac[::step], 6) + 0.0
    middle = 0.5 * (line.energy_min_ev + line.energy_max_ev)
    return NodeEntry(
        kind="line",
        k=_vector(line.k_frac[0]),
        k_cart=line.first_cart,
        energy_eV=middle,
        from_fermi_eV=line.from_reference_ev,
        multiplicity=line.multiplicity,
        chirality=None,
        berry_phase_pi=line.berry_phase_pi,
        velocities_eV_ang=(),
        velocities_m_s=(),
        type="",
        tilt=None,
        protection=line.protection,
        gap_around_meV=1000 * line.loop_gap_ev,
        orbit=n_orbits + number,
        images=line.n_images,
        length=line.length,
        winding=line.winding if line.closed else None,
        energy_range_eV=(line.energy_min_ev, line.energy_max_ev),
        path=tuple(_vector(k) for k in path),
    )


def _vector(k: np.ndarray[tuple[int, ...], np.dtype[np.float64]]) -> tuple[float, float, float]:
    x, y, z = (float(c) for c in k)
    return x, y, z
