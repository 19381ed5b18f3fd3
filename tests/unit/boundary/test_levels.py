"""Levels of half-crystals: closed forms, degeneracies, a plain count beside them."""

from __future__ import annotations

import numpy as np
import pytest

from boundary_models import prepared, ssh_chain
from chern_models import qi_wu_zhang, random_model
from lattice_models import wilson_dirac
from topovet.boundary.cone import windows
from topovet.boundary.levels import surface_levels
from topovet.boundary.slab import slab_hamiltonian


def _levels(model, miller, k_par, **options):
    _, _, stack = prepared(model, miller)
    k_par = np.atleast_2d(k_par)
    low, high = windows(stack, k_par, model.filling)
    return surface_levels(stack, k_par, low, high, **options)


def test_wilson_dirac_surface_levels_in_closed_form() -> None:
    """E = +-sqrt(sin^2 k_1 + sin^2 k_2) on either face, where |m + 2 - ... | leaves a bound state.

    With psi an eigenvector of the matrix that couples along the normal the mass drops out; the
    same argument as for Qi, Wu, Zhang's edge (see `test_published_boundary`).
    """
    k = np.array([[0.0, 0.0], [0.03, 0.0], [0.05, 0.04], [-0.02, 0.08]])
    for k_par, found in zip(k, _levels(wilson_dirac(m=-2.0), (0, 0, 1), k), strict=True):
        energy = np.sqrt((np.sin(2 * np.pi * k_par) ** 2).sum())
        for side in (0, 1):
            assert found.of(side) == pytest.approx([-energy, energy], abs=1e-4)
        assert found.doubtful == 0


@pytest.mark.parametrize("step_ev", [0.03, 0.2, 0.9])
def test_no_level_is_lost_on_a_coarse_grid(step_ev: float) -> None:
    k = np.stack([np.linspace(0.36, 0.64, 23), np.zeros(23)], axis=1)
    for k_par, found in zip(
        k, _levels(qi_wu_zhang(m=1.0), (0, 1, 0), k, step_ev=step_ev), strict=True
    ):
        energy = np.sin(2 * np.pi * k_par[0])
        assert sorted([*found.upper_ev, *found.lower_ev]) == pytest.approx(
            sorted([-energy, energy]), abs=1e-4
        )


def test_an_end_state_and_none() -> None:
    """Su, Schrieffer, Heeger: one at zero energy on each end for v < w, none for v > w."""
    for v, w, count in ((0.6, 1.0, 1), (1.0, 0.6, 0)):
        (found,) = _levels(ssh_chain(v=v, w=w), (0, 1, 0), [0.0, 0.0])
        assert [len(found.upper_ev), len(found.lower_ev)] == [count, count]
        assert np.abs([*found.upper_ev, *found.lower_ev]).max(initial=0.0) < 1e-4


def test_levels_are_those_of_a_thick_slab() -> None:
    """Random hoppings, no symmetry: every level in the window, and no other."""
    seen = 0
    for seed in range(4):
        model = random_model(seed, inversion=False)
        _, _, stack = prepared(model, (0, 0, 1))
        k = np.array([[0.11, 0.23], [0.37, 0.05]])
        low, high = windows(stack, k, model.filling)
        slab = np.linalg.eigvalsh(slab_hamiltonian(stack.planes_at(k), 24 * stack.reach))
        for i, found in enumerate(surface_levels(stack, k, low, high)):
            if high[i] - low[i] < 0.05:
                continue
            # next to the bulk a state reaches through the slab
            a, b = low[i] + 0.02, high[i] - 0.02
            both = np.sort([*found.upper_ev, *found.lower_ev])
            of_slab = slab[i][(slab[i] > a) & (slab[i] < b)]
            assert both[(both > a) & (both < b)] == pytest.approx(of_slab, abs=1e-3)
            seen += len(of_slab)
    assert seen >= 4


def test_an_empty_window_holds_nothing() -> None:
    _, _, stack = prepared(wilson_dirac(m=-2.0), (0, 0, 1))
    (found,) = surface_levels(stack, np.zeros((1, 2)), np.array([0.1]), np.array([-0.1]))
    assert len(found.upper_ev) == len(found.lower_ev) == 0


def test_among_bulk_states_nothing_is_taken_for_a_level() -> None:
    """Where a search reaches into the bands, by mistake or by the sampled edges, none is invented:
    a broadened state has no place that two imaginary parts agree on."""
    k = np.array([[0.0, 0.0], [0.11, 0.23]])
    for model in (wilson_dirac(m=-2.0), random_model(0, inversion=False)):
        _, _, stack = prepared(model, (0, 0, 1))
        low, high = windows(stack, k, model.filling)
        # from the window's edges into the bands
        for a, b in ((low - 0.08, low - 0.004), (high + 0.004, high + 0.08)):
            found = surface_levels(stack, k, a, b)
            bulk = stack.bulk_at(stack.planes_at(k), np.arange(400) / 400)
            levels = np.sort(np.linalg.eigvalsh(bulk).reshape(len(k), -1), axis=1)
            for i, levels_found in enumerate(found):
                # only where bulk levels are dense: another window may lie beyond a narrow band
                for energy in (*levels_found.upper_ev, *levels_found.lower_ev):
                    assert np.abs(levels[i] - energy).min() > 2e-3
