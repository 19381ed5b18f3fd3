"""The linear problem of the blocks: normal matrix against its definition, and its counts."""

from __future__ import annotations

import numpy as np
import pytest

from inverted_models import InvertedModel, random_inverted_model, with_noise
from topovet.errors import NoInversionError
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import build_model
from topovet.symmetry import inversion_blocks
from topovet.symmetry.inversion_blocks import invert_sites, solve_blocks
from topovet.symmetry.sites import declared_sites


def _made(seed: int, *, spinful: bool, move_homes: bool = False) -> InvertedModel:
    return random_inverted_model(
        np.random.default_rng(seed),
        [(2, True), (3, False)],
        cell=np.array([[4.0, 0, 0], [1.5, 4.2, 0], [0.3, -1.0, 5.0]]),
        centre=np.array([0.1, 0.2, 0.3]),
        spinful=spinful,
        move_homes=move_homes,
    )


def _violation(made: InvertedModel, blocks: np.ndarray) -> tuple[float, float]:
    """Sum of |U_s H_st(R) - H_p(s)p(t)(-R + T_t - T_s) U_t|^2 by its definition, one R at a time.

    And the sum of the squared blocks on both sides.
    """
    sites = declared_sites(made.positions_frac, made.crystal)
    images = invert_sites(sites, made.crystal, made.operator.centre_frac)
    h = {tuple(r): block for r, block in zip(made.model.r_cells, made.model.h_r, strict=True)}
    n = made.model.n_orb
    mean = np.trace(h[0, 0, 0]).real / n
    h[0, 0, 0] = h[0, 0, 0] - mean * np.eye(n)
    total, weight = 0.0, 0.0
    for s in range(sites.n_sites):
        for t in range(sites.n_sites):
            rows, columns = np.flatnonzero(sites.site_of == s), np.flatnonzero(sites.site_of == t)
            to_rows = np.flatnonzero(sites.site_of == images.partner[s])
            to_columns = np.flatnonzero(sites.site_of == images.partner[t])
            for r, block in h.items():
                image = tuple(int(x) for x in -np.array(r) + images.cells[t] - images.cells[s])
                there = h.get(image, np.zeros((n, n)))
                left = blocks[np.ix_(to_rows, rows)] @ block[np.ix_(rows, columns)]
                right = there[np.ix_(to_rows, to_columns)] @ blocks[np.ix_(to_columns, columns)]
                total += float(np.linalg.norm(left - right) ** 2)
                weight += float(np.linalg.norm(block[np.ix_(rows, columns)]) ** 2)
                weight += float(np.linalg.norm(there[np.ix_(to_rows, to_columns)]) ** 2)
    return total, weight


@pytest.mark.parametrize("spin", [1, 2])
def test_normal_matrix_is_the_sum_of_squares(spin: int) -> None:
    """For random blocks, and with a random Hamiltonian that has no inversion at all."""
    made = _made(4, spinful=True)
    rng = np.random.default_rng(5)
    made = InvertedModel(
        with_noise(made.model, 0.5, rng), made.crystal, made.positions_frac, made.operator
    )
    sites = declared_sites(made.positions_frac, made.crystal)
    images = invert_sites(sites, made.crystal, made.operator.centre_frac)
    problem = inversion_blocks._prepare(made.model, sites, images, spin)
    normal, weight, _ = inversion_blocks._normal_matrix(problem, 0.0)
    np.testing.assert_allclose(normal, normal.conj().T, atol=1e-12)
    vector = rng.normal(size=(len(normal), 2)) @ np.array([1, 1j])
    blocks = inversion_blocks._unpack(problem, vector)
    form = float((vector.conj() @ normal @ vector).real)
    assert (form, weight) == pytest.approx(_violation(made, blocks), rel=1e-10)


@pytest.mark.parametrize("spinful", [False, True])
@pytest.mark.parametrize("move_homes", [False, True])
def test_the_operator_is_the_only_solution(spinful: bool, move_homes: bool) -> None:
    made = _made(6, spinful=spinful, move_homes=move_homes)
    sites = declared_sites(made.positions_frac, made.crystal)
    images = invert_sites(sites, made.crystal, made.operator.centre_frac)
    found = solve_blocks(made.model, sites, images, spin=2 if spinful else 1)
    assert found.n_solutions == 1
    assert found.ratio > 1e3
    assert found.misfit < 1e-7
    overlap = np.vdot(found.vectors[0], made.operator.matrix)
    norms = np.linalg.norm(found.vectors[0]) * np.linalg.norm(made.operator.matrix)
    assert abs(overlap) == pytest.approx(norms, rel=1e-10)


def test_unrelated_hamiltonian_has_misfit_near_one() -> None:
    made = _made(7, spinful=False)
    rng = np.random.default_rng(8)
    other = with_noise(made.model, 10.0, rng)
    sites = declared_sites(made.positions_frac, made.crystal)
    images = invert_sites(sites, made.crystal, made.operator.centre_frac)
    found = solve_blocks(other, sites, images, spin=1)
    assert found.misfit > 0.6
    assert found.ratio < inversion_blocks.SAME_MISFIT


def test_decoupled_sets_are_counted() -> None:
    """Two sets of functions without any hopping between them have two solutions."""
    made = _made(9, spinful=False)
    n = made.model.n_orb
    double = np.zeros((made.model.n_r, 2 * n, 2 * n), dtype=complex)
    double[:, :n, :n] = made.model.h_r
    double[:, n:, n:] = 0.7 * made.model.h_r
    model = build_model(made.model.r_cells, double, spinful=False)
    positions = np.concatenate([made.positions_frac, made.positions_frac])
    sites = declared_sites(positions, made.crystal)
    images = invert_sites(sites, made.crystal, made.operator.centre_frac)
    found = solve_blocks(model, sites, images, spin=1)
    assert found.n_solutions == 2
    assert found.ratio > 1e3


def test_site_without_image_is_named() -> None:
    crystal = Crystal(4 * np.eye(3), (), ())
    sites = declared_sites(np.array([[0, 0, 0], [0.2, 0, 0]]), crystal)
    with pytest.raises(NoInversionError, match=r"site of function 2 0\.80 angstrom away"):
        invert_sites(sites, crystal, np.array([0.0, 0, 0]))


def test_sites_of_unlike_size_are_no_images() -> None:
    crystal = Crystal(4 * np.eye(3), (), ())
    sites = declared_sites(np.array([[0.2, 0, 0], [0.2, 0, 0], [-0.2, 0, 0]]), crystal)
    with pytest.raises(NoInversionError, match="2 functions on the site of function 1 to a site"):
        invert_sites(sites, crystal, np.zeros(3))


def test_too_many_unknowns_are_refused() -> None:
    n = int(np.sqrt(inversion_blocks.MAX_UNKNOWNS)) + 1
    crystal = Crystal(4 * np.eye(3), (), ())
    model = build_model(np.zeros((1, 3), dtype=int), np.eye(n)[None] + 0j, spinful=False)
    sites = declared_sites(np.zeros((n, 3)), crystal)
    with pytest.raises(NoInversionError, match="more than the 3000"):
        solve_blocks(model, sites, invert_sites(sites, crystal, np.zeros(3)), spin=1)
