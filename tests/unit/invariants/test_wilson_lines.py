"""Lines and strips: points where they are needed, errors where nothing helps, flux that adds up."""

from __future__ import annotations

import itertools
from dataclasses import replace

import numpy as np
import pytest

from chern_models import qi_wu_zhang
from lattice_models import LatticeModel, fu_kane_mele, kane_mele, wilson_dirac
from topovet.arrays import ComplexArray, FloatArray
from topovet.errors import ConvergenceError
from topovet.invariants.wilson_line import (
    LineCriteria,
    SolvedLine,
    extend_line,
    solve_lines,
)
from topovet.invariants.wilson_strip import StripLimits, strip_fluxes
from topovet.model.fourier import build_bloch_sum
from topovet.model.plane import coordinate_plane
from topovet.spectrum.plane_states import PlaneStates
from topovet.symmetry.time_reversal import spin_operator

CRITERIA = LineCriteria()


def states_of(model: LatticeModel, axis: int = 2, *, budget: int = 10_000) -> PlaneStates:
    bloch = build_bloch_sum(model.tight_binding())
    return PlaneStates(bloch, coordinate_plane(axis, 0.0), model.filling, max_solves=budget)


def lines_of(model: LatticeModel, across: FloatArray) -> list[SolvedLine]:
    return solve_lines(states_of(model).states_at, across, CRITERIA)


def test_a_narrow_gap_gets_the_points() -> None:
    """Mass 1e-3 at Gamma: spacing below 1e-3 there, 1/12 elsewhere, a few dozen points in all."""
    (line,) = lines_of(wilson_dirac(m=-2.999), np.array([0.0]))
    steps = np.diff(line.along)
    assert line.n_points < 50
    assert steps.min() < 1e-3
    assert steps.max() == pytest.approx(1 / 12)
    assert line.along[steps.argmin()] < 0.01 or line.along[steps.argmin()] > 0.99
    assert line.smallest_singular_value**2 >= 1 - CRITERIA.loss


def test_centres_stand_when_points_are_added() -> None:
    across = np.array([0.0, 0.13, 0.31, 0.5])
    dense = LineCriteria(points=200)
    model = kane_mele(lambda_r=0.05, lambda_v=0.1)
    for line, reference in zip(
        lines_of(model, across),
        solve_lines(states_of(model).states_at, across, dense),
        strict=True,
    ):
        assert np.abs(np.sort(line.hwcc) - np.sort(reference.hwcc)).max() < 0.02


def test_a_closed_gap_is_an_error_that_says_where() -> None:
    """Qi-Wu-Zhang at m = 0 closes at X = (0, 1/2)."""
    with pytest.raises(ConvergenceError, match=r"still turn .* near \(0.000000, 0.5"):
        lines_of(qi_wu_zhang(m=0.0), np.array([0.0]))


def test_a_budget_is_kept() -> None:
    states = states_of(fu_kane_mele(dt=(0.4, 0, 0, 0)), budget=30)
    with pytest.raises(ConvergenceError, match="budget of 30 eigenvalue problems is spent"):
        solve_lines(states.states_at, np.array([0.1, 0.2, 0.3]), CRITERIA)
    assert states.n_solves <= 30


def reversal(across: FloatArray, kets: ComplexArray) -> ComplexArray:
    return np.asarray(spin_operator(kets.shape[1], "interlaced") @ kets.conj())


@pytest.mark.parametrize("across", [0.0, 0.5])
def test_half_a_line_stands_for_both(across: float) -> None:
    """Time-reversed states give the same centres for about half of the solves."""
    model = kane_mele(lambda_r=0.05, lambda_v=0.1)
    whole, half = states_of(model), states_of(model)
    (expected,) = solve_lines(whole.states_at, np.array([across]), CRITERIA)
    (found,) = solve_lines(half.states_at, np.array([across]), CRITERIA, reversal=reversal)
    np.testing.assert_allclose(found.hwcc, expected.hwcc, atol=1e-10)
    assert half.n_solves == whole.n_solves // 2 + 1


def test_states_dropped_and_solved_again_are_the_same_line() -> None:
    states = states_of(kane_mele())
    (line,) = solve_lines(states.states_at, np.array([0.2]), CRITERIA)
    again = extend_line(states.states_at, replace(line, states=None), np.empty(0), CRITERIA)
    np.testing.assert_array_equal(again.along, line.along)
    np.testing.assert_allclose(again.hwcc, line.hwcc, atol=1e-10)
    more = extend_line(states.states_at, line, np.array([0.01, 0.02]), CRITERIA)
    assert more.n_points == line.n_points + 2
    np.testing.assert_allclose(more.hwcc, line.hwcc, atol=0.02)


@pytest.mark.parametrize("points", [2, 13])
def test_lines_begin_with_an_even_number_of_points(points: int) -> None:
    with pytest.raises(ValueError, match="even number"):
        LineCriteria(points=points)


@pytest.mark.parametrize("y", [0.0, 1.0, 1 - 1e-14, 0.25])
def test_a_point_is_never_there_twice(y: float) -> None:
    states = states_of(kane_mele())
    (line,) = solve_lines(states.states_at, np.array([0.2]), CRITERIA, extra=np.array([y]))
    assert (np.diff(line.along) > 0).all()
    more = extend_line(states.states_at, line, np.array([y]), CRITERIA)
    assert more.n_points == line.n_points


def test_an_extra_point_is_on_the_line() -> None:
    (line,) = solve_lines(
        states_of(kane_mele()).states_at, np.array([0.2]), CRITERIA, extra=np.array([0.123])
    )
    assert 0.123 in line.along


LIMITS = StripLimits()


@pytest.mark.parametrize("m", [1.0, -0.7, 2.4])
def test_flux_moves_the_sum_of_centres(m: float) -> None:
    """Strip by strip up to whole turns, and exactly for what is left after them."""
    lines = lines_of(qi_wu_zhang(m=m), np.linspace(0, 1, 17))
    fluxes = strip_fluxes(list(itertools.pairwise(lines)), LIMITS)
    for lower, upper, flux in zip(lines[:-1], lines[1:], fluxes, strict=True):
        moved = upper.hwcc.sum() - lower.hwcc.sum()
        assert (flux.turns - moved + 0.5) % 1.0 == pytest.approx(0.5, abs=1e-9)
        assert flux.largest < np.pi / 2


def test_flux_is_that_of_the_solid_angle() -> None:
    """Berry flux of the lower band of d.sigma is +1/2 of the solid angle swept by n = d/|d|."""
    states = states_of(qi_wu_zhang(m=1.0))
    lines = solve_lines(states.states_at, np.array([0.20, 0.21]), LineCriteria(points=100))
    (flux,) = strip_fluxes([(lines[0], lines[1])], LIMITS)
    x, y = np.meshgrid(np.array([0.205]), np.arange(2000) / 2000, indexing="ij")
    expected = 0.01 * _curvature(2 * np.pi * x, 2 * np.pi * y, 1.0).mean() * (2 * np.pi) ** 2
    assert 2 * np.pi * flux.turns == pytest.approx(expected, rel=1e-3)


def _curvature(kx: FloatArray, ky: FloatArray, m: float) -> FloatArray:
    """(1/2) n.(dn/dkx x dn/dky) = (1/2) d.(dd/dkx x dd/dky)/|d|^3."""
    zero = np.zeros_like(kx)
    d = np.stack([np.sin(kx), np.sin(ky), m + np.cos(kx) + np.cos(ky)])
    d_x = np.stack([np.cos(kx), zero, -np.sin(kx)])
    d_y = np.stack([zero, np.cos(ky), -np.sin(ky)])
    triple = (d * np.cross(d_x, d_y, axis=0)).sum(axis=0)
    return np.asarray(triple / (2 * np.linalg.norm(d, axis=0) ** 3))


def test_a_cone_between_sparse_lines_is_reported() -> None:
    """Half a turn of flux through one plaquette: beyond the limits, and points are missing too."""
    model = qi_wu_zhang(m=2 - 1e-4)  # cone at M = (1/2, 1/2)
    lines = lines_of(model, np.array([0.48, 0.52]))
    (flux,) = strip_fluxes([(lines[0], lines[1])], LIMITS)
    assert flux.largest > LIMITS.flux or flux.loss > LIMITS.loss
    assert len(flux.coarse_lower) + len(flux.coarse_upper) > 0
