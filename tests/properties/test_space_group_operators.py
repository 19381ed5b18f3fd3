"""Operators of all kinds of space groups, on Hamiltonians whose symmetry is known otherwise.

29 space groups, symmorphic and not, of all crystal systems, with s, p, d, f and hybrid functions
on and off atoms. Three sources of truth: Hamiltonians that are symmetric by geometry (integrals of
real functions, see `crystal_models`), the group laws, and the orthogonality of characters.

References
----------
Orthogonality of characters, also of projective representations: Bradley, Cracknell, The
Mathematical Theory of Symmetry in Solids (Oxford, 1972), sections 1.3 and 3.7.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from crystal_models import (
    RECIPES,
    CrystalModel,
    Recipe,
    crystal_model,
    orbital_basis,
    random_hamiltonian,
    shell_hamiltonian,
)
from lattice_models import LatticeModel
from model_changes import with_cell, with_home_cells, with_mixed_orbitals, with_order, with_origin
from topovet.arrays import ComplexArray, FloatArray
from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel
from topovet.model.hybrids import harmonic_coefficients
from topovet.model.real_harmonics import harmonic_rotation
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.hopping import real_space_residual_mev, transformed_at
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import (
    WannierOperator,
    factor_system,
    operator_at,
    with_time_reversal,
)
from topovet.symmetry.symmetrise import symmetrise

GENERIC_K = np.array([[0.137, 0.291, -0.412], [0.219, -0.087, 0.351], [-0.433, 0.178, 0.061]])
SPECIAL_K = np.array([[0, 0, 0], [0.5, 0, 0], [0.5, 0.5, 0], [0.5, 0.5, 0.5]])
CHEAP = tuple(r for r in RECIPES if r.number in (14, 76, 141, 152, 164, 186, 216))
IDS = [str(recipe.number) for recipe in RECIPES]


@pytest.fixture(autouse=True, scope="module")
def _one_thread() -> Iterator[None]:
    with one_blas_thread():
        yield


def hamiltonian_at(model: TightBindingModel, k_frac: FloatArray) -> ComplexArray:
    """H(k) by the plain sum over R."""
    phases = np.exp(2j * np.pi * np.asarray(k_frac) @ model.r_cells.T)
    return np.einsum("kr,rmn->kmn", phases, model.h_r)


def defect_at(model: TightBindingModel, operator: WannierOperator, k_frac: FloatArray) -> float:
    """Largest element of D(k) H(k) D(k)† - H(k'), conjugated where time reversal takes part."""
    d, h = operator_at(operator, k_frac), hamiltonian_at(model, k_frac)
    moved = d @ (h.conj() if operator.antiunitary else h) @ d.conj().transpose(0, 2, 1)
    image = hamiltonian_at(model, k_frac @ operator.k_rotation)
    return float(np.abs(moved - image).max())


def test_enough_space_groups() -> None:
    assert len({recipe.number for recipe in RECIPES}) >= 25


@pytest.mark.parametrize("recipe", RECIPES, ids=IDS)
def test_hamiltonians_symmetric_by_geometry_have_every_operation(recipe: Recipe) -> None:
    """With spin; over R for all operations, at k for some, and time reversal."""
    crystal = crystal_model(recipe, spinful=True)
    model = shell_hamiltonian(crystal)
    assert np.abs(model.h_r).max() > 0.1
    operators = crystal.operators()
    for operator in (*operators, crystal.time_reversal()):
        assert real_space_residual_mev(model, operator) < 1e-6
    product = with_time_reversal(operators[-1], crystal.basis)
    for operator in (operators[-1], operators[len(operators) // 2], product):
        assert defect_at(model, operator, GENERIC_K) < 1e-10


@pytest.mark.parametrize("recipe", RECIPES[::3], ids=IDS[::3])
def test_the_same_without_spin(recipe: Recipe) -> None:
    crystal = crystal_model(recipe, spinful=False)
    model = shell_hamiltonian(crystal)
    for operator in (*crystal.operators(), crystal.time_reversal()):
        assert real_space_residual_mev(model, operator) < 1e-6


@pytest.mark.parametrize("recipe", RECIPES[1::4], ids=IDS[1::4])
def test_functions_of_any_kind_on_every_site(recipe: Recipe) -> None:
    """Hybrids at random, other ones and another spin frame on each site."""
    crystal = crystal_model(recipe, spinful=True)
    mixed = with_mixed_orbitals(
        _lattice_model(crystal, shell_hamiltonian(crystal)), np.random.default_rng(recipe.number)
    )
    crystal = replace(crystal, basis=mixed.basis)
    for operator in (*crystal.operators(), crystal.time_reversal()):
        assert real_space_residual_mev(mixed.tight_binding(), operator) < 1e-6


@pytest.mark.parametrize("recipe", RECIPES, ids=IDS)
def test_group_laws_with_spin_and_time_reversal(recipe: Recipe) -> None:
    """Closure, associativity of the signs, and Theta^2 = -1; all signs + without spin."""
    crystal = crystal_model(recipe, spinful=True)
    unitary = crystal.operators()
    grey = [*unitary, *(with_time_reversal(o, crystal.basis) for o in unitary)]
    system = factor_system(grey if len(grey) <= 48 else unitary)
    assert system.defect < 1e-12
    p, s = system.product, system.sign
    first = np.arange(len(p))[:, None, None]
    # (ab)c = a(bc), as operations and with the signs; time reversal leaves real signs alone
    assert np.array_equal(p[p], p[first, p[None]])
    assert np.array_equal(s[:, :, None] * s[p], s[None] * s[first, p[None]])
    if len(grey) <= 48:
        theta = len(unitary) + _neutral(unitary)
        assert s[theta, theta] == -1
        assert p[theta, theta] == _neutral(unitary)
    spinless = factor_system(crystal_model(recipe, spinful=False).operators())
    assert np.all(spinless.sign == 1)
    assert spinless.defect < 1e-12


@pytest.mark.parametrize(("i", "recipe"), list(enumerate(RECIPES))[::2], ids=IDS[::2])
def test_symmetrised_random_hamiltonians_obey_every_operation(i: int, recipe: Recipe) -> None:
    """D(k) H(k) D(k)† = H(k') at generic k, by plain sums."""
    crystal = crystal_model(recipe, spinful=i % 2 == 0)
    model = random_hamiltonian(crystal, seed=recipe.number)
    theta = crystal.time_reversal() if i % 3 == 0 else None
    operators = crystal.operators()
    bloch = build_bloch_sum(model)
    assert max(_violation(bloch, o, GENERIC_K) for o in operators[1:]) > 0.1
    made = symmetrise(model, bloch, operators, GENERIC_K, time_reversal=theta).model
    for operator in (*operators, *(() if theta is None else (theta,))):
        assert defect_at(made, operator, GENERIC_K) < 1e-10
    if theta is None:
        assert defect_at(made, crystal.time_reversal(), GENERIC_K) > 1e-3


@pytest.mark.parametrize(("i", "recipe"), list(enumerate(RECIPES))[1::2], ids=IDS[1::2])
def test_characters_of_levels_are_orthogonal(i: int, recipe: Recipe) -> None:
    """Each level of a random Hamiltonian at a special k is one irreducible representation.

    Its characters have norm 1 over the little group, and two levels are the same representation
    or orthogonal: sum_g chi_a* chi_b / |G_k| is 1 or 0 up to a phase.
    """
    crystal = crystal_model(recipe, spinful=i % 2 == 1)
    operators = crystal.operators()
    model = random_hamiltonian(crystal, seed=3)
    made = symmetrise(model, build_bloch_sum(model), operators, GENERIC_K[:1]).model
    for k in SPECIAL_K[i % 3 :: 3]:
        little = [o for o in operators if _fixes(o, k)]
        energies, states = np.linalg.eigh(hamiltonian_at(made, k[None])[0])
        d = np.concatenate([operator_at(o, k[None]) for o in little])
        in_levels = np.einsum("mb,gmn,nb->gb", states.conj(), d, states)
        starts = np.flatnonzero(np.diff(energies, prepend=-np.inf) > 1e-7)
        characters = np.add.reduceat(in_levels, starts, axis=1)
        overlap = np.abs(characters.conj().T @ characters) / len(little)
        np.testing.assert_allclose(overlap, np.round(overlap), atol=1e-7)
        np.testing.assert_allclose(np.diag(overlap), 1.0, atol=1e-7)


@settings(max_examples=3, deadline=None)
@given(
    recipe=st.sampled_from(CHEAP),
    steps=st.lists(st.tuples(st.integers(0, 2), st.integers(1, 2), st.sampled_from((-1, 1))),
                   min_size=1, max_size=3),
    seed=st.integers(0, 2**32 - 1),
)  # fmt: skip
def test_operators_follow_cell_origin_order_and_home_cells(
    recipe: Recipe, steps: list[tuple[int, int, int]], seed: int
) -> None:
    """The crystal told differently: still symmetric, with the same traces at Gamma."""
    rng = np.random.default_rng(seed)
    crystal = crystal_model(recipe, spinful=True)
    told = _lattice_model(crystal, shell_hamiltonian(crystal, reach_ang=4.1))
    unimodular = np.eye(3, dtype=np.int64)
    for i, j, sign in steps:  # shears
        unimodular[i] += sign * unimodular[(i + j) % 3]
    shift = rng.random(3)
    n = told.n_orb
    order = rng.permutation(n // 2).repeat(2) * 2 + np.tile([0, 1], n // 2)
    told = with_origin(with_cell(told, unimodular), shift)
    told = with_home_cells(told, rng.integers(-1, 2, (n // 2, 3)).repeat(2, axis=0))
    told = with_order(told, order)
    # x' = M^-T x for columns of fractional coordinates, then the origin
    up = np.round(np.linalg.inv(unimodular)).astype(np.int64).T
    rotations = up @ crystal.rotations @ unimodular.T
    translations = crystal.translations @ up.T + shift - rotations @ shift
    built = build_operators(told.basis, told.crystal, rotations, translations)
    assert not built.reasons
    assert factor_system(built.operators).defect < 1e-10
    gamma, model = np.zeros((1, 3)), told.tight_binding()
    for before, after in zip(crystal.operators(), built.operators, strict=True):
        assert real_space_residual_mev(model, after) < 1e-6
        traces = [np.trace(operator_at(o, gamma)[0]) for o in (before, after)]
        assert traces[0] == pytest.approx(traces[1], abs=1e-9)


@settings(max_examples=10, deadline=None)
@given(recipe=st.sampled_from(RECIPES), spinful=st.booleans(), seed=st.integers(0, 2**32 - 1))
def test_k_and_r_tell_the_same_violation(recipe: Recipe, spinful: bool, seed: int) -> None:
    """For a Hamiltonian without symmetry: D H D† at k equals D(k) H(k) D(k)† by plain products."""
    rng = np.random.default_rng(seed)
    crystal = crystal_model(recipe, spinful=spinful)
    model = random_hamiltonian(crystal, seed=seed)
    operators = crystal.operators()
    operator = operators[rng.integers(len(operators))]
    if rng.random() < 0.5:
        operator = with_time_reversal(operator, crystal.basis)
    k = rng.random((3, 3))
    h, d = hamiltonian_at(model, k), operator_at(operator, k)
    plain = d @ (h.conj() if operator.antiunitary else h) @ d.conj().transpose(0, 2, 1)
    np.testing.assert_allclose(transformed_at(h, operator, k), plain, atol=1e-12)


def test_sp2_hybrids_and_a_lone_pair_in_a_layer() -> None:
    """Hybrids with a local frame: graphene's sp2 and pz, members pointing along the bonds."""
    recipe = Recipe(191, ("C",), ((1 / 3, 2 / 3, 0.0),), (2.46, 2.46, 6.0, 90, 90, 120), ("p",))
    planar = crystal_model(recipe, spinful=True)
    rows = []
    for place, angle in zip(planar.crystal.positions_frac, (0.0, np.pi), strict=True):
        cos, sin = np.cos(angle), np.sin(angle)
        turn = harmonic_rotation(np.array([[cos, -sin, 0], [sin, cos, 0], [0, 0, 1]]))
        rows += [(place, turn @ harmonic_coefficients(-2, mr)) for mr in (1, 2, 3)]
        rows.append((place, harmonic_coefficients(1, 1)))
    basis = orbital_basis(rows, spinful=True)
    crystal = CrystalModel(
        planar.crystal, basis, planar.rotations, planar.translations, np.zeros(16, dtype=np.int64)
    )
    model = shell_hamiltonian(crystal)
    assert len(crystal.operators()) == 24
    for operator in crystal.operators():
        assert real_space_residual_mev(model, operator) < 1e-6
        in_place = np.abs(operator.matrix[:6, :6]) + np.abs(operator.matrix[8:14, :6])
        # three members go into three members, with their spin
        assert np.allclose(np.sort((in_place**2).sum(axis=0)), 1.0)


def _lattice_model(crystal: CrystalModel, model: TightBindingModel) -> LatticeModel:
    return LatticeModel(
        "crystal", crystal.crystal, crystal.basis, model.r_cells, model.h_r, 1,
        crystal.spinful, (0.0, 0.0, 0.0),
    )  # fmt: skip


def _neutral(operators: tuple[WannierOperator, ...]) -> int:
    return next(i for i, o in enumerate(operators) if np.array_equal(o.rotation, np.eye(3)))


def _violation(bloch: BlochSum, operator: WannierOperator, k_frac: FloatArray) -> float:
    moved = transformed_at(bloch.at(k_frac), operator, k_frac)
    return float(np.abs(moved - bloch.at(k_frac @ operator.k_rotation)).max())


def _fixes(operator: WannierOperator, k: FloatArray) -> bool:
    apart = k @ operator.k_rotation - k
    return bool(np.abs(apart - np.round(apart)).max() < 1e-9)
