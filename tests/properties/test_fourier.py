"""The Fourier sum against plain loops and finite differences (hypothesis)."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from topovet.arrays import ComplexArray, FloatArray
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel, build_model
from topovet.spectrum.eigen import eigenstates, eigenvalues, mesh_eigenvalues, mesh_points

AXES = [(0,), (1,), (2,), (0, 1), (0, 2), (1, 2), (2, 0), (0, 1, 2)]

models = st.builds(
    lambda seed, n_orb, n_r, reach: _random_model(seed, n_orb, n_r, reach),
    st.integers(0, 2**32 - 1),
    st.integers(1, 5),
    st.integers(1, 12),
    st.integers(0, 3),
)
k_points = st.lists(
    st.tuples(*(st.floats(-2, 2, allow_nan=False, width=32) for _ in range(3))),
    min_size=1,
    max_size=4,
).map(lambda rows: np.array(rows, dtype=float))


def _random_model(seed: int, n_orb: int, n_r: int, reach: int) -> TightBindingModel:
    """Any list of R: repeated, without partners, with or without R = 0."""
    rng = np.random.default_rng(seed)
    r_cells = rng.integers(-reach, reach + 1, size=(n_r, 3))
    h_r = rng.normal(size=(n_r, n_orb, n_orb, 2)) @ np.array([1, 1j])
    return build_model(r_cells, h_r, spinful=False)


def plain_sum(model: TightBindingModel, k_frac: FloatArray) -> ComplexArray:
    """H(k) as it is written on paper."""
    h = np.zeros((model.n_orb, model.n_orb), dtype=complex)
    for r_cell, block in zip(model.r_cells, model.h_r, strict=True):
        phase = 2j * np.pi * sum(float(k) * int(r) for k, r in zip(k_frac, r_cell, strict=True))
        h += np.exp(phase) * block
    return h


@settings(max_examples=60, deadline=None)
@given(models, k_points)
def test_batch_equals_plain_loop(model: TightBindingModel, k_frac: FloatArray) -> None:
    h = build_bloch_sum(model).at(k_frac)
    expected = np.array([plain_sum(model, k) for k in k_frac])
    np.testing.assert_allclose(h, expected, atol=1e-11)
    np.testing.assert_array_equal(h, h.conj().transpose(0, 2, 1))


@settings(max_examples=60, deadline=None)
@given(models, k_points, st.sampled_from(AXES))
def test_partial_sum_equals_full_sum(
    model: TightBindingModel, k_frac: FloatArray, axes: tuple[int, ...]
) -> None:
    bloch = build_bloch_sum(model)
    kept = [i for i in range(3) if i not in axes]
    k_frac = k_frac.copy()
    k_frac[:, axes] = k_frac[0, axes]
    part = bloch.partial(axes, k_frac[0, axes])
    np.testing.assert_allclose(part.at(k_frac[:, kept]), bloch.at(k_frac), atol=1e-11)


@settings(max_examples=30, deadline=None)
@given(models, k_points)
def test_partial_sums_can_be_chained(model: TightBindingModel, k_frac: FloatArray) -> None:
    bloch = build_bloch_sum(model)
    first, second, third = k_frac[0]
    line = bloch.partial((1,), np.array([second])).partial((0,), np.array([first]))
    np.testing.assert_allclose(line.at(np.array([[third]])), bloch.at(k_frac[:1]), atol=1e-11)


@settings(max_examples=40, deadline=None)
@given(models, k_points)
def test_gradient_equals_finite_difference(model: TightBindingModel, k_frac: FloatArray) -> None:
    """Five-point differences; their error is step^4/30 times the fifth derivative."""
    bloch, step = build_bloch_sum(model), 1e-3
    gradient = bloch.gradient(k_frac)
    size = np.abs(model.h_r).sum() * (2 * np.pi * 3) ** 5
    for axis in range(3):
        e = step * np.eye(3)[axis]
        difference = (
            8 * (bloch.at(k_frac + e) - bloch.at(k_frac - e))
            - (bloch.at(k_frac + 2 * e) - bloch.at(k_frac - 2 * e))
        ) / (12 * step)
        error = float(np.abs(gradient[:, axis] - difference).max())
        assert error <= step**4 / 30 * size + 1e-9


@settings(max_examples=30, deadline=None)
@given(models, k_points, st.tuples(*(st.integers(-3, 3) for _ in range(3))))
def test_periodic_gauge(
    model: TightBindingModel, k_frac: FloatArray, g: tuple[int, int, int]
) -> None:
    bloch = build_bloch_sum(model)
    np.testing.assert_allclose(bloch.at(k_frac + np.array(g)), bloch.at(k_frac), atol=1e-10)


@settings(max_examples=30, deadline=None)
@given(models, k_points)
def test_eigen_routines_agree_with_plain_loop(model: TightBindingModel, k_frac: FloatArray) -> None:
    bloch = build_bloch_sum(model)
    plain = np.array([plain_sum(model, k) for k in k_frac])
    np.testing.assert_allclose(eigenvalues(bloch, k_frac), np.linalg.eigvalsh(plain), atol=1e-10)
    energies, states = eigenstates(bloch, k_frac)
    np.testing.assert_allclose(plain @ states, states * energies[:, None, :], atol=1e-9)


@settings(max_examples=20, deadline=None)
@given(models, st.tuples(*(st.integers(1, 4) for _ in range(3))))
def test_mesh_equals_scattered_points(model: TightBindingModel, mesh: tuple[int, int, int]) -> None:
    bloch = build_bloch_sum(model)
    energies = mesh_eigenvalues(bloch, mesh, even=False)
    scattered = eigenvalues(bloch, mesh_points(mesh))
    np.testing.assert_allclose(energies.reshape(scattered.shape), scattered, atol=1e-10)


@settings(max_examples=20, deadline=None)
@given(st.integers(0, 2**32 - 1), st.tuples(*(st.integers(1, 5) for _ in range(3))))
def test_half_mesh_of_a_real_hamiltonian(seed: int, mesh: tuple[int, int, int]) -> None:
    """Real H(R): E(-k) = E(k), so half of the planes give the whole mesh."""
    rng = np.random.default_rng(seed)
    r_cells = rng.integers(-2, 3, size=(8, 3))
    h_r = rng.normal(size=(8, 3, 3)).astype(complex)
    bloch = build_bloch_sum(build_model(r_cells, h_r, spinful=False))
    half = mesh_eigenvalues(bloch, mesh, even=True)
    np.testing.assert_allclose(half, mesh_eigenvalues(bloch, mesh, even=False), atol=1e-10)


def test_model_does_not_depend_on_the_way_it_is_listed() -> None:
    """Shuffled R; blocks split over repeated entries; the second half left to Hermiticity."""
    model = _random_model(5, 4, 12, 2)
    rng = np.random.default_rng(6)
    order = rng.permutation(model.n_r)
    shuffled = build_model(model.r_cells[order], model.h_r[order], spinful=False)
    share = rng.uniform(0.1, 0.9, size=model.n_r)[:, None, None]
    split = build_model(
        np.concatenate([model.r_cells, model.r_cells[order]]),
        np.concatenate([share * model.h_r, ((1 - share) * model.h_r)[order]]),
        spinful=False,
    )
    upper = slice(model.n_r // 2, None)
    half = build_model(model.r_cells[upper], model.h_r[upper], spinful=False)
    for other in (shuffled, split, half):
        np.testing.assert_array_equal(other.r_cells, model.r_cells)
        assert np.abs(other.h_r - model.h_r).max() == pytest.approx(0.0, abs=1e-15)
