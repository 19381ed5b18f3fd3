"""Figures: well-formed, deterministic, right marks in the right places, honest when data lack."""

from __future__ import annotations

import itertools
import re
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from xml.etree import ElementTree

import numpy as np
import pytest

import invented_dossiers as invented
from topovet.report.figures import (
    bands_figure,
    build_figures,
    decay_figure,
    palette,
    tasks_figure,
    zone_figure,
)
from topovet.report.figures.bands import distinct_bands, energy_zero, near_gap_window, point_name
from topovet.report.figures.labels import place_labels
from topovet.report.figures.layering import layered
from topovet.report.figures.parity_marks import parity_kind, spread
from topovet.report.material import ReportMaterial, TaskEntry

CASES = [invented.strong, invented.sheet, invented.undetermined, invented.hostile]
SVG = "{http://www.w3.org/2000/svg}"


def _texts(svg: str) -> list[str]:
    return [e.text or "" for e in ElementTree.fromstring(svg).iter(f"{SVG}text")]


def _strong_bands(**changes: object) -> str:
    material = invented.strong()
    assert material.bands is not None
    assert material.parity is not None
    options: dict[str, object] = {
        "n_occ": 6,
        "gap": material.gap,
        "trim": material.parity.trim,
    }
    return bands_figure(material.bands, **(options | changes))  # type: ignore[arg-type]


@pytest.mark.parametrize("build", [invented.sheet, invented.hostile])
def test_figures_are_whole_and_deterministic(build: Callable[[], ReportMaterial]) -> None:
    figures = build_figures(build())
    assert figures == build_figures(build())
    for svg in figures.values():
        root = ElementTree.fromstring(svg)
        assert root.tag == f"{SVG}svg"
        assert root.get("viewBox")
        assert root.find(f"{SVG}title") is not None
        assert len((root.findtext(f"{SVG}desc") or "").split()) > 8
        assert not re.search(r"\d{4}-\d\d-\d\d|[Mm]atplotlib", svg)


@pytest.mark.parametrize("build", CASES)
def test_ids_differ_between_figures_of_one_page(build: Callable[[], ReportMaterial]) -> None:
    ids = [i for svg in build_figures(build()).values() for i in re.findall(r'\bid="([^"]+)"', svg)]
    assert len(ids) == len(set(ids))


def test_which_figures_there_are() -> None:
    assert list(build_figures(invented.strong())) == [
        *("zone", "bands", "bands-near-gap", "decay", "tasks")
    ]
    assert list(build_figures(invented.undetermined())) == ["zone", "decay", "tasks"]


def test_user_settings_of_matplotlib_change_nothing() -> None:
    import matplotlib

    plain = decay_figure(invented.decay())
    with matplotlib.rc_context({"font.size": 30, "axes.facecolor": "red", "svg.fonttype": "path"}):
        assert decay_figure(invented.decay()) == plain
        assert matplotlib.rcParams["font.size"] == 30


def test_importing_the_figures_does_not_load_matplotlib() -> None:
    code = "import sys, topovet.report.html; sys.exit('matplotlib' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code]).returncode == 0


# ---- bands


def test_band_axes_have_units_and_names() -> None:
    texts = _texts(_strong_bands())
    assert "E − E(VBM)  (eV)" in texts
    assert "distance along the path  (1/Å)" in texts
    assert [t for t in texts if t in "ΓMKALH"] == list("ΓMKΓALHA")
    assert "gap, 0.700 eV" in texts


def _marks(svg: str) -> dict[str, int]:
    """Marks by colour of their edge: even and odd ones, the legend's own left out."""
    uses = ElementTree.fromstring(svg).iter(f"{SVG}use")
    styles = [u.get("style") or "" for u in uses]
    return {
        "even": sum(f"stroke: {palette.FILLED}" in s for s in styles) - 1,
        "odd": sum(f"stroke: {palette.ODD}" in s and palette.ODD in s.split(";")[0] for s in styles)
        - 1,
    }


def test_every_kramers_pair_at_a_trim_has_its_mark() -> None:
    svg = _strong_bands(window_ev=(-20.0, 20.0))
    material = invented.strong()
    assert material.parity is not None
    by_k = {t.k: t for t in material.parity.trim}
    # the path meets Gamma twice, M, A twice and L; K and H are no TRIM
    stops = [(0, 0, 0), (0.5, 0, 0), (0, 0, 0), (0, 0, 0.5), (0.5, 0, 0.5), (0, 0, 0.5)]
    parities = [p for k in stops for p in by_k[k].level_parities]
    assert len(parities) == 36
    marks = _marks(svg)
    assert marks["even"] == sum(p > 0 for p in parities)
    assert marks["odd"] == sum(p < 0 for p in parities)


def test_half_discs_are_drawn_in_two_halves() -> None:
    """Odd parity must not rest on colour: its mark has an empty half, the even one has none."""
    fills = re.findall(r'<use [^>]*style="fill: (#\w+); stroke: (#\w+)', _strong_bands())
    odd = [fill for fill, stroke in fills if stroke == palette.ODD]
    even = [fill for fill, stroke in fills if stroke == palette.FILLED]
    assert odd.count(palette.ODD) == odd.count(palette.WHITE) > 0
    assert set(even) == {palette.FILLED}


def test_no_marks_without_parities() -> None:
    texts = _texts(_strong_bands(trim=()))
    assert "even parity" not in texts
    assert "odd parity" not in texts


def test_filled_bands_are_heavier_than_empty_ones() -> None:
    svg = _strong_bands(trim=())
    width = {
        colour: {float(w) for c, w in re.findall(r"stroke: (#\w+); stroke-width: ([\d.]+)", svg)
                 if c == colour}
        for colour in (palette.FILLED, palette.EMPTY)
    }  # fmt: skip
    assert min(width[palette.FILLED]) > 1.5 * max(width[palette.EMPTY])


def test_zero_of_energy_is_stated() -> None:
    material = invented.strong()
    bands, gap = material.bands, material.gap
    assert bands is not None
    assert gap is not None
    assert energy_zero(bands, 6, gap, 5.3).ev == gap.vbm_ev
    semimetal = replace(gap, status="semimetal-direct-gap")
    assert energy_zero(bands, 6, semimetal, 5.3).ev == 5.3
    assert energy_zero(bands, 6, None, None).ev == bands.energies_ev[:, 5].max()
    assert "5.050 eV in the file" in _strong_bands()


def test_the_fermi_energy_is_drawn_where_it_is_not_the_zero() -> None:
    assert "E(F) given" in _texts(_strong_bands(fermi_ev=5.3))
    assert "E(F) given" not in _texts(_strong_bands(fermi_ev=99.0))


def test_kramers_pairs_are_drawn_once_but_never_across_the_filling() -> None:
    energies = np.array([[0.0, 0.0, 1.0, 1.0], [0.2, 0.2, 1.5, 1.5]])
    assert distinct_bands(energies, 2, 0.01) == [0, 2]
    assert distinct_bands(np.zeros((3, 4)), 2, 0.01) == [0, 2]
    assert distinct_bands(energies + np.array([0, 0.1, 0, 0]), 2, 0.01) == [0, 1, 2]


def test_small_splittings_do_not_add_up_to_a_lost_band() -> None:
    ladder = 0.006 * np.arange(5.0)[None, :]
    assert distinct_bands(ladder, 5, 0.01) == [0, 2, 4]


def test_paths_break_at_jumps() -> None:
    material = invented.strong()
    bands = material.bands
    assert bands is not None
    half = len(bands.distance) // 2
    distance = bands.distance.copy()
    distance[half:] -= distance[half] - distance[half - 1]
    jumped = replace(bands, distance=distance)
    whole = bands_figure(bands, n_occ=6).count("stroke-width: 1.7")
    broken = bands_figure(jumped, n_occ=6).count("stroke-width: 1.7")
    assert whole == 3
    assert broken == 2 * whole


def test_marks_that_would_overlap_stand_side_by_side() -> None:
    assert spread(np.array([0.0, 0.05, 1.0]), 0.1).tolist() == [-0.5, 0.5, 0.0]
    assert spread(np.array([]), 0.1).tolist() == []


@pytest.mark.parametrize(
    ("parity", "kind"), [(0.99, "even"), (-1.0, "odd"), (0.5, "mixed"), (-0.89, "mixed")]
)
def test_parity_kinds(parity: float, kind: str) -> None:
    assert parity_kind(parity) == kind


def test_windows_and_names() -> None:
    gap = invented.strong().gap
    assert gap is not None
    low, high = near_gap_window(gap)
    assert low < 0 < gap.cbm_ev - gap.vbm_ev < high
    assert [point_name(p) for p in ("G", "B1", "X")] == ["Γ", "B₁", "X"]


# ---- zone


@pytest.mark.parametrize("build", [invented.strong, invented.sheet])
def test_zone_carries_every_sign(build: Callable[[], ReportMaterial]) -> None:
    material = build()
    assert material.parity is not None
    texts = _texts(zone_figure(material.crystal, material.parity.trim))
    deltas = [t.delta for t in material.parity.trim]
    assert texts.count("+") == deltas.count(1)
    assert texts.count("−") == deltas.count(-1)
    for k in itertools.product("0½", repeat=material.crystal.dimension):
        label = "(" + ", ".join([*k, "0"][:3]) + ")"
        assert label in texts or f"Γ {label}" in texts
    assert ("b₃" in texts) == (material.crystal.dimension == 3)


def test_zone_without_parities_shows_no_sign() -> None:
    texts = _texts(zone_figure(invented.crystal(3)))
    assert sum(text.startswith(("(", "Γ (")) for text in texts) == 8
    assert not {"+", "−"} & set(texts)


def test_hidden_edges_are_dashed() -> None:
    svg = zone_figure(invented.crystal(3))
    dashed = [line for line in svg.split("<path ") if "stroke-dasharray: " in line]
    # a hexagonal prism seen from above its side shows 13 of its 18 edges; 3 lines lead to axes
    assert len(dashed) == 18 - 13 + 3


# ---- decay


def test_decay_leaves_out_zeros_and_says_so() -> None:
    decay = replace(invented.decay(), distances_ang=(0.0, 1.0, 2.0), largest_mev=(10.0, 0.0, 0.1))
    svg = decay_figure(decay)
    assert "Largest element at 2 distances, falling from 10.0 meV to 0.100 meV" in svg
    assert "1 distances hold only zeros" in svg
    texts = _texts(svg)
    assert {"distance between the functions  (Å)", "largest |H(R)|  (meV)"} <= set(texts)
    assert "rim: at most 4.20 meV" in texts


def test_decay_without_sites_or_mesh() -> None:
    decay = replace(invented.decay(), positions="lattice vectors", rim_ang=None, rim_mev=None)
    texts = _texts(decay_figure(decay))
    assert "distance |R|  (Å)" in texts
    assert not any("rim" in text for text in texts)


def test_decay_of_nothing() -> None:
    ElementTree.fromstring(
        decay_figure(replace(invented.decay(), distances_ang=(), largest_mev=()))
    )


# ---- tasks


def test_every_task_is_drawn_with_state_and_time() -> None:
    texts = _texts(tasks_figure(invented.tasks()))
    assert {t.name for t in invented.tasks()} <= set(texts)
    assert "✓ done, 2.9 s" in texts
    assert "⟲ cached, < 1 ms" in texts
    assert "∅ not-applicable" in texts


def test_unknown_states_are_refused() -> None:
    with pytest.raises(ValueError, match="perhaps"):
        TaskEntry("a", (), "perhaps", "", None, "")


def test_rows_follow_needs_and_edges_join_neighbours() -> None:
    needs = {"a": [], "b": ["a"], "c": ["a", "b"], "d": ["a", "c", "elsewhere"], "e": []}
    layout = layered(needs)
    row = {item: i for i, items in enumerate(layout.rows) for item in items}
    assert [row[n] for n in "abcde"] == [0, 1, 2, 3, 0]
    assert all(row[b] == row[a] + 1 for a, b in layout.edges)
    # a -> c and a -> d follow from a -> b -> c -> d
    assert sorted(layout.edges) == [("a", "b"), ("b", "c"), ("c", "d")]


def test_long_edges_have_waypoints() -> None:
    layout = layered({"a": [], "z": [], "b": ["a"], "c": ["b", "z"]})
    assert ("z", ("z", "c", 1)) in layout.edges
    assert (("z", "c", 1), "c") in layout.edges


def test_tasks_that_wait_for_each_other_are_an_error() -> None:
    with pytest.raises(ValueError, match="a, b wait for each other"):
        layered({"a": ["b"], "b": ["a"]})


def test_labels_find_free_room() -> None:
    anchors = np.array([[0.0, 0.0], [14.0, 0.0]])
    marks = np.concatenate([anchors, np.full((2, 2), 10.0)], axis=1)
    placed = place_labels(anchors, np.full((2, 2), 10.0), marks, clearance=6.0)
    assert placed.overlap == 0
    assert np.abs(placed.centres[0] - placed.centres[1]).max() >= 10
