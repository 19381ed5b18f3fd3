"""Bounds over (k, lambda) hold, and a proof fails where the gap closes."""

from __future__ import annotations

import numpy as np
import pytest

from deformation_ends import end_of
from lattice_models import bhz, kane_mele, wilson_dirac
from topovet.deformation.comparison import compare_ends
from topovet.deformation.gap_curve import GapCurve
from topovet.deformation.path import Path, build_path
from topovet.deformation.proof import (
    ClosingMetError,
    Prover,
    _expand_path,
    _with_lambda_axis,
    images_of_path,
)
from topovet.model.crystal import Crystal
from topovet.spectrum.eigen import eigenvalues
from topovet.spectrum.proof.block_bound import bound_boxes
from topovet.spectrum.proof.symmetry_use import no_images, residual_everywhere
from topovet.spectrum.proof.zone import choose_region
from topovet.symmetry.operators import build_operator


def _open_path() -> tuple[Path, Crystal, GapCurve]:
    a, b = (end_of(bhz(m=m, a=a, d=d)) for m, a, d in ((0.8, 1.0, 0.0), (2.0, 0.7, 0.2)))
    pair = compare_ends(a, b)
    path = build_path(pair)
    return path, a.crystal, GapCurve(path, 2, (8, 8, 1), (True, True, False), False)


def test_derivatives_in_k_and_lambda_are_those_of_the_path() -> None:
    path, _, _ = _open_path()
    point, step = np.array([[0.11, 0.23, 0.0, 0.37]]), 1e-5
    for axis in range(4):
        away = step * np.eye(4)[axis]
        plus, minus = (path.gradient(point + s * away) for s in (1, -1))
        plain = (path.lower_at(point + away) - path.lower_at(point - away)) / (2 * step)
        np.testing.assert_allclose(path.gradient(point)[:, axis], plain, atol=1e-7)
        second = (plus - minus) / (2 * step)
        i, j = np.triu_indices(4)
        pairs = [np.flatnonzero((i == min(axis, c)) & (j == max(axis, c)))[0] for c in range(4)]
        np.testing.assert_allclose(path.hessian(point)[:, pairs], second, atol=1e-5)


def test_the_path_is_straight() -> None:
    path, _, _ = _open_path()
    k = np.array([[0.2, 0.4, 0.0]])
    ends = [path.bloch_at(lam).at(k) for lam in (0.0, 1.0)]
    np.testing.assert_allclose(path.bloch_at(0.3).at(k), 0.7 * ends[0] + 0.3 * ends[1], atol=1e-12)
    h_r = path.model_at(0.3).h_r
    np.testing.assert_allclose(h_r, 0.7 * path.a.h_r + 0.3 * path.b.h_r)


@pytest.mark.parametrize("seed", range(4))
def test_bounds_of_boxes_hold(seed: int) -> None:
    """No sampled (k, lambda) of a box has a gap below its bound, and bounds tighten with size."""
    path, crystal, curve = _open_path()
    region = choose_region(no_images().matrices, crystal.reciprocal, crystal.periodic)
    expansion = _expand_path(path, region, 0.1, 0.7)
    in_lambda = _with_lambda_axis(region, 0.1, 0.7)
    rng = np.random.default_rng(seed)
    slack = []
    for size in (0.12, 0.03):
        half = size * rng.uniform(0.3, 1.0, size=(1, 3))
        centre = rng.uniform(half, 1 - half)
        remainder = np.array([expansion.remainder_ev(half[0])])
        bound = bound_boxes(expansion, curve.objective, centre, half, remainder)
        u = centre + half * rng.uniform(-1, 1, size=(200, 3))
        corners = np.array(np.meshgrid([-1, 1], [-1, 1], [-1, 1])).reshape(3, -1).T
        points = in_lambda.origin + np.concatenate([u, centre + half * corners]) @ in_lambda.axes
        gaps = [
            curve.objective.of(eigenvalues(path.bloch_at(p[3]), p[None, :3]))[0] for p in points
        ]
        assert bound.lower[0] <= min(gaps)
        slack.append(min(gaps) - bound.lower[0])
    assert slack[1] < slack[0]


def test_the_remainder_bounds_what_second_order_leaves_out() -> None:
    """In the fixed gauge: H~ at a displaced point against its Taylor sum to second order."""
    path, crystal, _ = _open_path()
    region = choose_region(no_images().matrices, crystal.reciprocal, crystal.periodic)
    expansion = _expand_path(path, region, 0.0, 1.0)
    rng = np.random.default_rng(5)
    i, j = np.triu_indices(3)
    weight = np.where(i == j, 0.5, 1.0)
    for half in (np.array([0.05, 0.03, 0.1]), np.array([0.2, 0.1, 0.3])):
        u = rng.uniform(0.3, 0.7, size=3)
        du = half * rng.choice([-1, 1], size=3)
        h, first, second = (x[0] for x in expansion.derivatives(u[None]))
        turn = np.exp(2j * np.pi * np.einsum("a,amn->mn", du[:-1], expansion.start.offsets))
        moved = expansion.derivatives((u + du)[None])[0][0] * turn
        taylor = h + np.einsum("a,amn->mn", du, first)
        taylor = taylor + np.einsum("p,pmn->mn", weight * du[i] * du[j], second)
        left = np.linalg.norm(moved - taylor, ord=2)
        assert left <= expansion.remainder_ev(half)
        assert left > 1e-3 * expansion.remainder_ev(half)


def test_a_stretch_is_proved_and_its_bounds_hold() -> None:
    path, crystal, curve = _open_path()
    curve.survey(np.linspace(0, 1, 5))
    images = images_of_path(path, (), time_reversal=True)
    assert len(images.matrices) == 2
    stretches, n_solves = Prover(curve, crystal, images).prove(0.0, 1.0, max_solves=20_000)
    assert n_solves < 5_000
    assert [s.lo for s in stretches][1:] == [s.hi for s in stretches][:-1]
    k = np.random.default_rng(1).uniform(size=(400, 3)) * [1, 1, 0]
    for s in stretches:
        assert 0 < s.proved_min_ev <= s.attained_ev
        for lam in (s.lo, (s.lo + s.hi) / 2, s.hi):
            assert s.proved_min_ev <= curve.objective.of(eigenvalues(path.bloch_at(lam), k)).min()


def test_no_gap_is_proved_that_closes() -> None:
    """Kane-Mele through its transition, told of nothing: the closing is run into."""
    ends = [end_of(kane_mele(lambda_v=v), inversion=False) for v in (0.25, 0.4)]
    path = build_path(compare_ends(*ends))
    curve = GapCurve(path, 2, (6, 6, 1), (True, True, False), True)
    curve.add_starts(np.array([[0.5, 0.0, 0.0]]))
    for lam in (0.0, 1.0):
        curve.at(lam)
    prover = Prover(curve, ends[0].crystal, images_of_path(path, (), time_reversal=True))
    with pytest.raises(ClosingMetError):
        prover.prove(0.0, 1.0, max_solves=20_000)
    met = min(curve.samples(), key=lambda s: s.gap_ev)
    assert met.lam == pytest.approx((3 * np.sqrt(3) * 0.06 - 0.25) / 0.15, abs=1e-3)


def test_a_budget_that_ends_proves_nothing_where_boxes_are_left() -> None:
    _, crystal, curve = _open_path()
    curve.survey(np.linspace(0, 1, 3))
    stretches, _ = Prover(curve, crystal, no_images()).prove(0.0, 1.0, max_solves=5)
    assert all(s.proved_min_ev == 0 for s in stretches)


def test_an_image_has_one_residual_for_both_ends() -> None:
    """A mirror that one end breaks costs on the whole way what it misses there."""
    a, b = end_of(wilson_dirac(m=-2.2)), end_of(wilson_dirac(m=-2.0, zeeman=0.1))
    path = build_path(compare_ends(a, b))
    assert a.basis is not None
    mirror = build_operator(a.basis, a.crystal, np.diag([-1, 1, 1]), np.zeros(3))
    for way in (path, build_path(compare_ends(b, a))):
        images = images_of_path(way, [mirror], time_reversal=False)
        at = next(i for i, m in enumerate(images.matrices) if m[0, 0] == -1)
        assert images.residuals_ev[at] == residual_everywhere(path.b, mirror)
        assert images.residuals_ev[at] >= 2 * 0.1
    assert residual_everywhere(path.a, mirror) < 1e-12
