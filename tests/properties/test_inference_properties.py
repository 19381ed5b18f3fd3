"""Inference on random Hamiltonians with a known inversion: any blocks, cells, centres and homes."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from inverted_models import InvertedModel, random_inverted_model, with_noise
from topovet.symmetry.inference import align_sign, infer_inversion
from topovet.symmetry.sites import assign_sites, declared_sites

FEW = settings(max_examples=25, deadline=None)

shapes = st.lists(st.tuples(st.integers(1, 3), st.booleans()), min_size=1, max_size=2)


def _made(seed: int, functions: list[tuple[int, bool]], *, spinful: bool) -> InvertedModel:
    rng = np.random.default_rng(seed)
    cell = np.diag(rng.uniform(4, 6, 3)) + rng.uniform(-1, 1, (3, 3))
    return random_inverted_model(
        rng, functions, cell=cell, centre=rng.uniform(-1, 1, 3), spinful=spinful, move_homes=True
    )


@FEW
@given(st.integers(0, 10**6), shapes, st.booleans())
def test_inferred_operator_is_the_one_built_in(
    seed: int, functions: list[tuple[int, bool]], spinful: bool
) -> None:
    made = _made(seed, functions, spinful=spinful)
    sites = declared_sites(made.positions_frac, made.crystal)
    centre = made.operator.centre_frac
    found = infer_inversion(made.model, made.crystal, sites, centre, spinful=spinful)
    assert found.operator is not None, found.reason
    assert found.max_residual_mev == pytest.approx(0, abs=1e-6)
    assert found.null_space == 1
    matrix = align_sign(found.operator, made.operator).matrix
    np.testing.assert_allclose(matrix, made.operator.matrix, atol=1e-7)


@FEW
@given(st.integers(0, 10**6), shapes)
def test_scattered_centres_serve_as_well_as_declared_positions(
    seed: int, functions: list[tuple[int, bool]]
) -> None:
    """Centres off their site by a tenth of an angstrom, each with its inverse at the partner."""
    made = _made(seed, functions, spinful=True)
    rng = np.random.default_rng(seed)
    offsets = rng.uniform(-0.03, 0.03, (made.model.n_orb, 3))
    centres = made.positions_frac + offsets @ np.linalg.inv(made.crystal.cell)
    found = assign_sites(centres, made.crystal)
    declared = declared_sites(made.positions_frac, made.crystal)
    np.testing.assert_array_equal(found.site_of, declared.site_of)
    np.testing.assert_array_equal(found.homes, declared.homes)
    centre = made.operator.centre_frac
    inferred = infer_inversion(made.model, made.crystal, found, centre, spinful=True)
    assert inferred.operator is not None, inferred.reason
    assert inferred.max_residual_mev == pytest.approx(0, abs=1e-6)


@settings(max_examples=12, deadline=None)
@given(st.integers(0, 10**6), shapes)
def test_noise_moves_the_operator_by_no_more_than_itself(
    seed: int, functions: list[tuple[int, bool]]
) -> None:
    """What is not refused is near the truth: hoppings are of the order of 1 eV, noise 20 meV."""
    made = _made(seed, functions, spinful=True)
    noisy = with_noise(made.model, 0.02, np.random.default_rng(seed))
    sites = declared_sites(made.positions_frac, made.crystal)
    centre = made.operator.centre_frac
    found = infer_inversion(noisy, made.crystal, sites, centre, spinful=True)
    if found.reliability != "good" or found.null_space != 1:
        return
    assert found.operator is not None
    matrix = align_sign(found.operator, made.operator).matrix
    assert np.linalg.norm(matrix - made.operator.matrix, ord=2) < 0.5
