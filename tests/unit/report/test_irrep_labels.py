"""Irreps on the band plot: which levels, which words, and that nothing overlaps."""

from __future__ import annotations

import itertools
from dataclasses import replace

import numpy as np
import pytest

import invented_dossiers as invented
from topovet.invariants.irrep_results import IrrepContent, LevelIrreps, PointIrreps
from topovet.report.figures.bands import bands_figure
from topovet.report.figures.irrep_labels import (
    LINE_PT,
    Frame,
    IrrepLabel,
    irrep_text,
    place_irreps,
)
from topovet.spectrum.results import BandPath

RESOLVED = IrrepContent((1.0,), (1,), 1.0, True)
FILLING = 6


def level(first: int, energy: float, label: str, textbook: str | None = None) -> LevelIrreps:
    return LevelIrreps(first, 2, energy, 0.0, label, textbook, RESOLVED)


def point(name: str, k: tuple[float, ...], labels: list[str]) -> PointIrreps:
    """The six Kramers pairs of the invented bands at one k."""
    energies = invented.levels(np.array([k]), 3)[0]
    found = [
        level(2 * i, float(e), x) for i, (e, x) in enumerate(zip(energies, labels, strict=True))
    ]
    return PointIrreps(
        name, np.array(k), np.array([k]), True, 12, 12, (), tuple(found), RESOLVED, 0.3, 6, 0, 0, 0
    )


def path() -> BandPath:
    return invented.band_path(3, invented.crystal(3).reciprocal)


def frame(bands: BandPath, window: tuple[float, float] = (-4.0, 4.0)) -> Frame:
    length = float(bands.distance[-1])
    return Frame(-0.012 * length, 1.024 * length, window[0], window[1] - window[0], 565.0, 285.0)


SIX = ["Γ2a+", "Γ2b−", "Γ2a−", "Γ2b+", "Γ2a+", "Γ2b−"]
IRREPS = [point("G", (0, 0, 0), SIX), point("A", (0, 0, 0.5), [x.replace("Γ", "A") for x in SIX])]


def placed(
    bands: BandPath | None = None, irreps: list[PointIrreps] | None = None
) -> tuple[IrrepLabel, ...]:
    bands = bands or path()
    return place_irreps(bands, IRREPS if irreps is None else irreps, FILLING, 5.4, frame(bands))


def overlap(a: IrrepLabel, b: IrrepLabel) -> bool:
    across = a.left_pt < b.right_pt and b.left_pt < a.right_pt
    return across and abs(a.y_pt - b.y_pt) < LINE_PT


def test_levels_next_to_the_gap_are_labelled_once_for_each_point() -> None:
    labels = placed()
    assert len([x for x in labels if x.text.startswith("Γ")]) <= 6
    assert {x.text for x in labels if x.filled} <= {"Γ2a⁺", "Γ2b⁻", "Γ2a⁻", "A2a⁺", "A2b⁻", "A2a⁻"}
    assert len({round(x.x_pt, 3) for x in labels}) == 2  # Γ comes twice on the path
    assert len(labels) >= 8


def test_nothing_overlaps_and_everything_is_inside() -> None:
    labels = placed()
    assert not any(overlap(a, b) for a, b in itertools.combinations(labels, 2))
    for label in labels:
        assert 0 <= label.left_pt < label.right_pt <= 565
        assert LINE_PT / 2 <= label.y_pt <= 285 - LINE_PT / 2


def test_labels_keep_the_order_of_their_levels() -> None:
    for a, b in itertools.combinations(placed(), 2):
        if a.x_pt == b.x_pt:
            assert (a.y_pt - b.y_pt) * (a.level_pt - b.level_pt) >= 0


def test_marks_are_kept_clear() -> None:
    bands = path()
    x, y = frame(bands).x_pt(0.0), frame(bands).y_pt(np.array([-0.35, 0.35]))
    marks = np.array([[float(x) + d, float(e)] for e in y for d in (-4.0, 4.0)])
    for label in place_irreps(bands, IRREPS, FILLING, 5.4, frame(bands), marks):
        near = np.abs(marks[:, 1] - label.y_pt) < LINE_PT / 2 + 3.2
        inside = (marks[:, 0] > label.left_pt - 3.2) & (marks[:, 0] < label.right_pt + 3.2)
        assert not (near & inside).any()


def test_a_point_of_one_irrep_says_nothing() -> None:
    assert placed(irreps=[point("G", (0, 0, 0), ["Γ2"] * 6)]) == ()


def test_points_off_the_path_and_levels_that_cannot_be_read_are_left_out() -> None:
    assert placed(irreps=[point("X", (0.5, 0.5, 0.0), SIX)]) == ()
    unclear = replace(RESOLVED, resolved=False)
    gamma = IRREPS[0]
    levels = tuple(replace(x, content=unclear) for x in gamma.levels[:3]) + gamma.levels[3:]
    assert not any(x.filled for x in placed(irreps=[replace(gamma, levels=levels)]))


@pytest.mark.parametrize(
    ("label", "textbook", "text"),
    [
        ("G4+", "Γ8+", "Γ₈⁺"),
        ("L1ab−", "L4,5−", "L₄‚₅⁻"),
        ("W1cd", None, "W1cd"),
        ("X4±", None, "X4±"),
        ("G2a+", None, "Γ2a⁺"),
        ("?", None, ""),
        ("G2⊕G1ab", "Γ6⊕Γ4,5", "Γ₆⊕Γ₄‚₅"),
    ],
)
def test_typesetting(label: str, textbook: str | None, text: str) -> None:
    assert irrep_text(level(0, 0.0, label, textbook)) == text


def test_the_figure_carries_them_and_says_so() -> None:
    svg = bands_figure(path(), n_occ=FILLING, irreps=IRREPS, window_ev=(-4.0, 4.0))
    assert "Γ2a⁺" in svg
    assert "Irreps beside the levels next to the gap" in svg
    assert svg == bands_figure(path(), n_occ=FILLING, irreps=IRREPS, window_ev=(-4.0, 4.0))
    assert "Irreps" not in bands_figure(path(), n_occ=FILLING, window_ev=(-4.0, 4.0))
