"""A made-up surface of a made-up Weyl semimetal, for the tests of verdicts and reports."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from topovet.boundary.arcs.results import Arc, ArcSurvey, LoopCount, Projection


def projection(chirality: int, k: float, **parts: Any) -> Projection:
    nodes = (0,) if chirality > 0 else (1,)
    made = Projection((0.0, k), (0.0, 1.2 * k), nodes, chirality, 5.41, 5.41, 0.4)
    return replace(made, **parts)


def loop(number: int, chirality: int | None) -> LoopCount:
    if chirality is None:
        why = "no energy curve separates the projected bulk bands"
        return LoopCount(number, "unresolved", why, 0.1, None, -0.01, None, why)
    return LoopCount(number, "ok", "", 0.1, chirality, 0.2, (1, 3), "")


def survey(**parts: Any) -> ArcSurvey:
    """Two projections that surface levels confirm; one arc of known length, one that was lost."""
    path = np.array([[0.0, 0.2], [0.0, 0.1], [0.0, -0.2]])
    made = ArcSurvey(
        status="agree",
        reason="",
        miller=(1, 0, -1),
        normal_cart=(1.0, 0.0, 0.0),
        chosen_by="separates the chiralities",
        terminations=("upper half, Te <i>outermost", "lower half, Te outermost"),
        projections=(projection(1, 0.2), projection(-1, -0.2), projection(0, 0.0)),
        loops=(loop(0, 1), loop(1, None)),
        arcs=(
            Arc(0, 0, 1, 5.41, path, 0.48, ""),
            Arc(1, 0, None, 5.41, path[:2], None, "lost at k = (0, 0.1) of the surface zone"),
        ),
        arcs_note="",
        n_solves=90,
    )
    return replace(made, **parts)


WRONG = survey(
    status="disagree",
    reason="around k = (0, 0.2) of the surface zone levels count 2, but the nodes projected there "
    "add up to 1",
    loops=(loop(0, 2),),
    arcs=(),
)
OPEN = survey(status="unresolved", reason="made up", loops=(loop(0, None),), arcs=())
