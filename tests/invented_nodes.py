"""Made-up searches for nodes: what a verdict and a report may be handed."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

import invented_dossiers as invented
from invented_findings import changed
from topovet.invariants.nodes.results import NodalLine, NodeSearch, Pocket, PointNode, Reference
from topovet.report.material import ReportMaterial
from topovet.verdict.findings import Findings
from topovet.verdict.judge import judge


def point(charge: int | None = 1, z: float = 0.2, **parts: Any) -> PointNode:
    """A Weyl point on the third axis, near the Fermi level."""
    made = PointNode(
        k=(0.0, 0.0, z),
        k_cart=(0.0, 0.0, 1.2 * z),
        orbit=0,
        kind="weyl",
        gap_ev=1e-10,
        energy_ev=5.41,
        from_reference_ev=0.01,
        multiplicity=2,
        n_filled=1,
        charge=charge,
        berry_phase_pi=None,
        surface_radius=0.05,
        surface_gap_ev=0.2,
        velocities=(3.0, 2.0, 1.0),
        tilt=0.3,
        protection="",
    )
    return replace(made, **parts)


def line(**parts: Any) -> NodalLine:
    """A ring about the centre of the zone."""
    angle = 2 * np.pi * np.arange(40) / 40
    made = NodalLine(
        k_frac=0.2 * np.stack([np.cos(angle), np.sin(angle), 0 * angle], axis=1),
        n_images=1,
        first_cart=(0.24, 0.0, 0.0),
        closed=True,
        winding=(0, 0, 0),
        length=1.5,
        energy_min_ev=5.3,
        energy_max_ev=5.5,
        from_reference_ev=0.0,
        largest_gap_ev=1e-9,
        multiplicity=2,
        berry_phase_pi=1.0,
        loop_gap_ev=0.2,
        protection="filled states change their eigenvalues of the mirror ⊥ (0, 0, 1)",
    )
    return replace(made, **parts)


def search(*points: PointNode, lines: tuple[NodalLine, ...] = (), **parts: Any) -> NodeSearch:
    """A complete list."""
    made = NodeSearch(
        filling=10,
        points=points,
        lines=lines,
        pockets=(),
        elsewhere_ev=2e-3,
        complete=True,
        reason="",
        charge_sum=sum(p.charge or 0 for p in points),
        reference=Reference(5.4, "given"),
        attained_ev=1e-10,
        attained_k=(0.0, 0.0, 0.2),
        degenerate=False,
        images=np.eye(3, dtype=np.int64)[None],
        n_open=12,
        n_solves=900,
    )
    return replace(made, **parts)


WEYL = search(point(1, 0.2), point(-1, -0.2))
INCOMPLETE = search(
    point(1),
    complete=False,
    reason="the chiralities add up to 1, not to zero",
    pockets=(Pocket((0.1, 0.2, 0.3), 4e-4),),
)


def findings_with(nodes: NodeSearch | None) -> Findings:
    """The sound case of the other tests with its gap closed."""
    gap = {"direct_ev": 1e-10, "indirect_ev": -0.01, "status": "gapless"}
    made = changed(gap=gap)
    return replace(made, nodes=nodes, parity=None)


def material_with(nodes: NodeSearch) -> ReportMaterial:
    findings = findings_with(nodes)
    verdict = judge(findings, inputs=[], settings={}, task_seconds={})
    return replace(invented.strong(), verdict=verdict, nodes=nodes, gap=findings.gap, parity=None)
