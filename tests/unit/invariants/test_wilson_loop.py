"""Loops of states: unitary parts, ordered products, centres; each against its slow twin."""

from __future__ import annotations

import numpy as np
import pytest

from lattice_models import atomic_insulator, fu_kane_mele
from plain_wilson import plain_hwcc
from topovet.arrays import ComplexArray, FloatArray
from topovet.invariants.wilson_loop import (
    BRANCH,
    LinePoints,
    Links,
    eigenphases,
    hybrid_wannier_centres,
    loop_links,
    measure_links,
    ordered_products,
    renewed_links,
    unitary_part,
    worst_singular_values,
)
from topovet.model.fourier import build_bloch_sum


def random_unitaries(rng: np.random.Generator, n: int, m: int) -> ComplexArray:
    return np.linalg.qr(rng.normal(size=(n, m, m)) + 1j * rng.normal(size=(n, m, m)))[0]


def overlaps_with(singular: FloatArray, rng: np.random.Generator) -> Links:
    """Links whose overlaps have the given singular values (n, m)."""
    n, m = singular.shape
    overlaps = random_unitaries(rng, n, m) * singular[:, None, :] @ random_unitaries(rng, n, m)
    return measure_links(np.broadcast_to(np.eye(m, dtype=complex), overlaps.shape), overlaps)


@pytest.mark.parametrize("lowest", [0.999, 0.9, 0.6, 0.3, 0.01, 1e-6])
def test_unitary_part_is_that_of_the_svd(lowest: float) -> None:
    """By series where little is lost, by SVD elsewhere, and both in one batch."""
    rng = np.random.default_rng(1)
    singular = rng.uniform(lowest, 1.0, size=(20, 5))
    singular[:10] = rng.uniform(0.95, 1.0, size=(10, 5))
    links = overlaps_with(singular, rng)
    w, _, v = np.linalg.svd(links.overlaps)
    np.testing.assert_allclose(unitary_part(links), w @ v, atol=2e-8)


def test_loss_bounds_the_smallest_singular_value() -> None:
    rng = np.random.default_rng(2)
    links = overlaps_with(rng.uniform(0.2, 1.0, size=(50, 4)), rng)
    smallest = np.linalg.svd(links.overlaps, compute_uv=False)[:, -1]
    assert (smallest**2 >= 1 - links.losses - 1e-12).all()
    assert worst_singular_values(links, np.array([50]))[0] == smallest[links.losses.argmax()]


@pytest.mark.parametrize("counts", [[1], [2, 1, 5], [7], [4, 4], [1, 1, 1, 13]])
def test_products_keep_their_order(counts: list[int]) -> None:
    rng = np.random.default_rng(3)
    matrices = random_unitaries(rng, sum(counts), 3)
    found = ordered_products(matrices, np.array(counts))
    ends = np.cumsum(counts)
    for product, start, end in zip(found, ends - counts, ends, strict=True):
        expected = np.eye(3)
        for matrix in matrices[start:end]:
            expected = expected @ matrix
        np.testing.assert_allclose(product, expected, atol=1e-12)


@pytest.mark.parametrize("from_cut", [0.0, 1e-13, 1e-9, 1e-5, 1e-2, 1.0])
def test_phases_are_those_of_the_eigenvalues(from_cut: float) -> None:
    """With an eigenvalue however near to where the circle is cut, and one at the cut's far side."""
    rng = np.random.default_rng(5)
    phases = rng.uniform(-np.pi, np.pi, size=(7, 6))
    phases[:4, 0] = np.angle(BRANCH) + from_cut * np.array([1, -1, 1, -1])
    phases[:, 1] = phases[:, 2]
    turn = random_unitaries(rng, 7, 6)
    unitary = (turn * np.exp(1j * phases)[:, None, :]) @ turn.conj().swapaxes(1, 2)
    found, expected = np.exp(1j * eigenphases(unitary)), np.exp(1j * phases)
    nearest = np.abs(found[:, :, None] - expected[:, None, :])
    assert nearest.min(axis=2).max() < 1e-9
    assert nearest.min(axis=1).max() < 1e-9


def test_phases_of_matrices_on_the_cut() -> None:
    phases = eigenphases(BRANCH * np.broadcast_to(np.eye(3), (2, 3, 3)))
    np.testing.assert_allclose(np.exp(1j * phases), BRANCH, atol=1e-12)


def test_phases_do_not_feel_errors_of_the_moduli() -> None:
    """U (1 + E) with E Hermitian and small: the phases change to second order in E only."""
    rng = np.random.default_rng(6)
    unitary = random_unitaries(rng, 50, 8)
    error = 1e-8 * (rng.normal(size=(50, 8, 8)) + 1j * rng.normal(size=(50, 8, 8)))
    nearly = unitary @ (np.eye(8) + error + error.conj().swapaxes(1, 2))
    found, expected = np.sort(eigenphases(nearly)), np.sort(eigenphases(unitary))
    np.testing.assert_allclose(found, expected, atol=1e-11)


def solved(k_frac: FloatArray, counts: list[int], along: FloatArray) -> LinePoints:
    model = fu_kane_mele(dt=(0.4, 0, 0, 0))
    h = build_bloch_sum(model.tight_binding()).at(k_frac)
    return LinePoints(np.array(counts), along, np.linalg.eigh(h)[1][:, :, :2])


def test_centres_are_those_of_the_plain_loop() -> None:
    """Three lines of different numbers of points in one batch, against one k at a time."""
    model, counts = fu_kane_mele(dt=(0.4, 0, 0, 0)), [12, 17, 30]
    starts = np.array([[0.1, 0.2, 0.0], [0.5, 0.3, 0.0], [0.9, 0.7, 0.0]])
    along = np.concatenate([np.arange(n) / n for n in counts])
    k_frac = np.repeat(starts, counts, axis=0) + along[:, None] * np.array([0, 0, 1])
    points = solved(k_frac, counts, along)
    found = hybrid_wannier_centres(loop_links(points), points.counts)
    for centres, start, n in zip(found, starts, counts, strict=True):
        expected = plain_hwcc(model.hamiltonian_at, start, np.array([0, 0, 1.0]), n, 2)
        np.testing.assert_allclose(centres, expected, atol=1e-7)


def test_rotated_states_have_the_same_centres() -> None:
    rng = np.random.default_rng(4)
    along = np.arange(16) / 16
    points = solved(np.stack([0 * along + 0.1, along, 0 * along + 0.3], axis=1), [16], along)
    turned = LinePoints(points.counts, along, points.states @ random_unitaries(rng, 16, 2))
    np.testing.assert_allclose(
        hybrid_wannier_centres(loop_links(turned), turned.counts),
        hybrid_wannier_centres(loop_links(points), points.counts),
        atol=1e-10,
    )


@pytest.mark.parametrize("axis", [0, 1, 2])
def test_atomic_gauge_gives_positions(axis: int) -> None:
    """Without hopping the centres along b_i are the fractional positions of the filled orbitals."""
    model = atomic_insulator(hop=0.0, filled="p")
    shift = np.array([0.12, 0.34, 0.87])
    along = np.arange(8) / 8
    k_frac = np.zeros((8, 3))
    k_frac[:, axis] = along
    states = np.linalg.eigh(build_bloch_sum(model.tight_binding()).at(k_frac))[1][:, :, :6]
    tau = (model.basis.positions_frac + shift)[:, axis]
    atomic = np.exp(-2j * np.pi * np.outer(along, tau))[:, :, None] * states
    points = LinePoints(np.array([8]), along, atomic)
    centres = hybrid_wannier_centres(loop_links(points, np.exp(-2j * np.pi * tau)), points.counts)
    np.testing.assert_allclose(centres, (0.5 + shift[axis]) % 1.0, atol=1e-10)


def test_links_are_kept_where_a_line_got_no_points() -> None:
    """Both lines get points, one of them at its end; what comes out is as if all were measured."""
    along = np.concatenate([[*np.arange(8) / 8, 0.93], np.sort([*np.arange(6) / 6, 0.2, 0.55])])
    across = np.repeat([0.1, 0.4], [9, 8])
    after = solved(np.stack([across, along, 0 * along], axis=1), [9, 8], along)
    before = after.kept(~np.isin(along, [0.93, 0.2, 0.55]))
    assert before.counts.tolist() == [8, 6]
    closing = np.exp(1j * np.arange(after.states.shape[1]))
    links = loop_links(before, closing)
    found, expected = renewed_links(before, links, after, closing), loop_links(after, closing)
    np.testing.assert_allclose(found.overlaps, expected.overlaps, atol=1e-12)
    np.testing.assert_allclose(found.defects, expected.defects, atol=1e-12)
    np.testing.assert_allclose(found.losses, expected.losses, atol=1e-12)
    # the first line keeps all links but its last one
    assert np.array_equal(found.overlaps[:7], links.overlaps[:7])
