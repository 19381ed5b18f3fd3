"""g H g^-1 in real space against a plain slow twin, and the residual it gives."""

from __future__ import annotations

import numpy as np
import pytest

from crystal_models import RECIPES, crystal_model, random_hamiltonian, shell_hamiltonian
from lattice_models import fu_kane_mele, wilson_dirac
from topovet.arrays import ComplexArray
from topovet.model.hamiltonian import TightBindingModel, build_model
from topovet.symmetry.hopping import (
    real_space_residual_mev,
    transformed_half,
    transformed_hopping,
)
from topovet.symmetry.inversion import build_inversion, inverted_hopping
from topovet.symmetry.operators import WannierOperator, build_operator, with_time_reversal

SMALL = (RECIPES[0], RECIPES[9], RECIPES[13])


def slow_twin(
    model: TightBindingModel, operator: WannierOperator
) -> dict[tuple[int, ...], ComplexArray]:
    """<a 0| g H g^-1 |b R'> one by one, from g|n R> = sum_a |a, W R + L_n - C_a> M[a, n]."""
    made: dict[tuple[int, ...], ComplexArray] = {}
    m, n_orb = operator.matrix, model.n_orb
    for r, h in zip(model.r_cells, model.h_r, strict=True):
        for i, j in np.ndindex(n_orb, n_orb):
            element = h[i, j].conjugate() if operator.antiunitary else h[i, j]
            for a in np.flatnonzero(m[:, i]):
                for b in np.flatnonzero(m[:, j]):
                    bra = operator.shifts[i] - operator.homes[a]
                    ket = operator.rotation @ r + operator.shifts[j] - operator.homes[b]
                    cell = tuple(int(x) for x in ket - bra)
                    block = made.setdefault(cell, np.zeros((n_orb, n_orb), dtype=complex))
                    block[a, b] += m[a, i] * element * m[b, j].conjugate()
    return made


def as_dict(r_cells: np.ndarray, h_r: ComplexArray) -> dict[tuple[int, ...], ComplexArray]:
    return {tuple(int(x) for x in r): h for r, h in zip(r_cells, h_r, strict=True)}


def assert_same(
    one: dict[tuple[int, ...], ComplexArray], other: dict[tuple[int, ...], ComplexArray]
) -> None:
    for cell in one.keys() | other.keys():
        zero = np.zeros(next(iter(one.values())).shape)
        np.testing.assert_allclose(one.get(cell, zero), other.get(cell, zero), atol=1e-13)


@pytest.mark.parametrize("recipe", SMALL, ids=lambda recipe: str(recipe.number))
@pytest.mark.parametrize("antiunitary", [False, True])
def test_against_the_slow_twin(recipe: object, antiunitary: bool) -> None:
    crystal = crystal_model(recipe, spinful=False)  # type: ignore[arg-type]
    random = random_hamiltonian(crystal, seed=1)
    near = (np.abs(random.r_cells) <= [1, 0, 0]).all(axis=1)
    model = build_model(random.r_cells[near], random.h_r[near], spinful=False)
    operator = crystal.operators()[-1]
    homes = np.random.default_rng(2).integers(-1, 2, operator.homes.shape)
    operator = WannierOperator(
        operator.rotation, operator.translation, operator.matrix, operator.shifts, homes
    )
    if antiunitary:
        operator = with_time_reversal(operator, crystal.basis)
    assert_same(as_dict(*transformed_hopping(model, operator)), slow_twin(model, operator))


def test_half_of_it_determines_the_rest() -> None:
    crystal = crystal_model(RECIPES[9], spinful=True)
    model = random_hamiltonian(crystal, seed=4)
    for operator in crystal.operators()[1::3]:
        r_half, half = transformed_half(model, operator)
        assert not r_half[0].any()
        whole = as_dict(r_half, half)
        whole |= as_dict(-r_half[1:], half[1:].conj().transpose(0, 2, 1))
        assert_same(whole, as_dict(*transformed_hopping(model, operator)))


def test_inversion_is_a_case_of_it() -> None:
    model = fu_kane_mele()
    built = model.tight_binding()
    rng = np.random.default_rng(7)
    noise = rng.normal(size=built.h_r.shape)
    built = build_model(built.r_cells, built.h_r + noise, spinful=True)
    centre = np.array(model.centre)
    general = build_operator(model.basis, model.crystal, -np.eye(3, dtype=np.int64), 2 * centre)
    special = build_inversion(model.basis, model.crystal, centre)
    assert_same(
        as_dict(*transformed_hopping(built, general)), as_dict(*inverted_hopping(built, special))
    )


def test_residual_is_the_norm_of_what_is_broken() -> None:
    """30 meV between s and pz of one site: inversion turns its sign, which makes a change of 60."""
    model = wilson_dirac(m=-2.0)
    built = model.tight_binding()
    operator = build_operator(model.basis, model.crystal, -np.eye(3, dtype=np.int64), np.zeros(3))
    assert real_space_residual_mev(built, operator) == pytest.approx(0, abs=1e-10)
    h_r = built.h_r.copy()
    for spin in (0, 1):
        h_r[built.n_r // 2, spin, 2 + spin] += 0.03
        h_r[built.n_r // 2, 2 + spin, spin] += 0.03
    broken = TightBindingModel(built.r_cells, h_r, True)
    assert real_space_residual_mev(broken, operator) == pytest.approx(60, rel=1e-9)


def test_hopping_whose_image_is_absent_counts() -> None:
    """One hopping along x without its fellow along y."""
    crystal = crystal_model(RECIPES[26], spinful=False)  # rock salt
    shells = shell_hamiltonian(crystal, reach_ang=3.5)
    extra = np.zeros_like(shells.h_r)
    far = int(np.flatnonzero((shells.r_cells == [2, 0, 0]).all(axis=1))[0])
    extra[far, 0, 0] = 0.01
    model = build_model(shells.r_cells, shells.h_r + extra, spinful=False)
    # one of the pair R, -R was given: the model holds the mean, 5 meV
    assert max(real_space_residual_mev(model, o) for o in crystal.operators()) == pytest.approx(
        5.0, rel=1e-6
    )
