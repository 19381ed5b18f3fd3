"""The flow of hybrid Wannier centres as a picture, from made-up flows."""

from __future__ import annotations

from xml.etree import ElementTree

import numpy as np
import pytest

from topovet.invariants.results import WilsonPlane
from topovet.report.figures.flow import _ribbon, _segments, flow_figure


def plane(name: str, z2: int | None, *, lines: int = 13) -> WilsonPlane:
    """Two centres that part and meet again (z2 = 0) or change partners (z2 = 1)."""
    across = np.linspace(0, 0.5, lines)
    turn = across * (2.0 if z2 else 0.0) + 0.1 * np.sin(2 * np.pi * across)
    centres = np.sort(np.stack([0.5 - turn / 2, 0.5 + turn / 2], axis=1) % 1.0, axis=1)
    gaps = np.stack([centres[:, 1] - centres[:, 0], 1 - centres[:, 1] + centres[:, 0]], axis=1)
    middle = np.where(
        gaps[:, 0] > gaps[:, 1], centres.mean(axis=1), (centres.mean(axis=1) + 0.5) % 1.0
    )
    return WilsonPlane(
        plane=name,
        across=(1, 0, 0),
        along=(0, 1, 0),
        status="ok" if z2 is not None else "unresolved",
        reason="" if z2 is not None else "the budget ended",
        z2=z2,
        lines=lines,
        points_per_line=16,
        smallest_gap=float(gaps.max(axis=1).min()),
        smallest_singular_value=0.9,
        smallest_direct_gap_ev=0.3,
        narrowest_k=(0.0, 0.0, 0.0),
        kramers_splitting=0.0,
        n_solves=300,
        flow_across=across,
        flow_hwcc=centres,
        gap_centres=middle,
        references=np.array([0.25]),
        crossings=np.array([1 if z2 else 0]),
    )


@pytest.mark.parametrize("n", [1, 6])
def test_figure_is_sound_svg_and_says_the_result(n: int) -> None:
    svg = flow_figure([plane(f"k{i}=0", i % 2) for i in range(n)])
    root = ElementTree.fromstring(svg)
    text = " ".join(root.itertext())
    assert "plane k0=0: Z₂ = 0, reference crossed 0×" in text
    assert "centre (periods)" in text
    if n > 1:
        assert "plane k1=0: Z₂ = 1, reference crossed 1×" in text
    assert svg == flow_figure([plane(f"k{i}=0", i % 2) for i in range(n)])


def test_unresolved_plane_shows_no_index() -> None:
    assert "plane k1=0: unresolved" in flow_figure([plane("k1=0", None)])


def test_ribbon_holds_no_centre() -> None:
    flow = plane("k1=0", 1)
    left, height, width, bottom = _ribbon(flow)
    lines = len(flow.flow_across)
    assert width.min() >= 0
    assert left[0] == 0
    for i in range(lines):
        for part in (i, i + lines):  # the part that runs over 1 comes in again at 0
            inside = (flow.flow_hwcc[i] > bottom[part] + 1e-9) & (
                flow.flow_hwcc[i] < bottom[part] + height[part] - 1e-9
            )
            assert not inside.any()


def test_pieces_join_neighbours_around_the_circle() -> None:
    pieces = _segments(plane("k1=0", 1, lines=41))
    assert np.abs(pieces[:, 1, 1] - pieces[:, 0, 1]).max() < 0.05
    assert pieces[:, :, 0].min() == 0
