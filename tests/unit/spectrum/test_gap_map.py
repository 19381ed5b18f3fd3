"""The map of the direct gap against the bands of models in closed form."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from case_writer import write_case
from lattice_models import kane_mele, wilson_dirac
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.pipeline.dossier import start_run
from topovet.spectrum.gap_map import choose_axis, map_gap
from topovet.spectrum.results import GapMap

K = np.array([0.02, 0.31, 0.47])


def test_gaps_are_those_of_the_closed_form() -> None:
    """Wilson-Dirac bands are +-sqrt(sum sin^2 + (m + sum cos)^2), each twice."""
    model = wilson_dirac(m=-2.0)
    found = map_gap(
        build_bloch_sum(model.tight_binding()),
        Crystal(np.eye(3), ("Bi",), np.zeros((1, 3))),
        2,
        K,
        1,
    )
    assert (found.axis, found.fixed_frac) == (1, 0.31)
    u, v = np.meshgrid(found.u_frac, found.v_frac, indexing="ij")
    k = 2 * np.pi * np.stack([u, np.full_like(u, 0.31), v], axis=-1)
    mass = -2.0 + np.cos(k).sum(axis=-1)
    expected = 2 * np.sqrt((np.sin(k) ** 2).sum(axis=-1) + mass**2)
    assert np.allclose(found.gap_ev, expected, atol=1e-10)


def test_the_minimum_is_near_the_middle_and_one_period_is_shown() -> None:
    model = wilson_dirac(m=-2.0)
    found = map_gap(
        build_bloch_sum(model.tight_binding()),
        Crystal(np.eye(3), ("Bi",), np.zeros((1, 3))),
        2,
        K,
        0,
    )
    for shown, at in ((found.u_frac, K[1]), (found.v_frac, K[2])):
        assert np.ptp(shown) == pytest.approx(1.0)
        assert abs(shown.mean() - at) <= 0.25


def test_the_plane_kept_is_that_of_a_line_of_small_gaps() -> None:
    gaps = np.ones((10, 12, 14))
    gaps[3, :, 5] = 0.1
    assert choose_axis(gaps, np.array([0.3, 0.4, 5 / 14]), (True, True, True)) in (0, 2)
    assert choose_axis(gaps, np.array([0.3, 0.4, 5 / 14]), (True, False, True)) == 1


def test_a_case_in_two_dimensions_is_mapped_whole(tmp_path: Path) -> None:
    case = write_case(kane_mele(lambda_v=0.1), tmp_path / "case")
    run = start_run(case)
    found: GapMap = run.result("gap-map")
    gap = run.result("gap")
    assert (found.axis, found.fixed_frac) == (2, 0.0)
    assert gap.direct_ev - 1e-9 <= found.gap_ev.min() < 1.5 * gap.direct_ev
    quick = start_run(case, settings={"effort": "quick"})
    assert quick.result("gap-map") is None
