"""Inversion from the Hamiltonian alone: exact on models, refused where there is none."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from inverted_models import random_inverted_model, with_noise
from lattice_models import (
    LatticeModel,
    atomic_insulator,
    bhz,
    fu_kane_mele,
    kane_mele,
    wilson_dirac,
)
from model_changes import with_atomic_pair, with_home_cells, with_mixed_orbitals
from topovet.model.hamiltonian import TightBindingModel
from topovet.symmetry.inference import (
    InferredInversion,
    align_sign,
    infer_inversion,
    residuals_mev,
)
from topovet.symmetry.inversion import build_inversion, real_space_residual_mev
from topovet.symmetry.sites import SiteAssignment, declared_sites

MODELS = {
    "kane_mele": kane_mele(),
    "kane_mele_no_soc": kane_mele(lambda_so=0.0),
    "bhz": bhz(m=1.0),
    "wilson_dirac": wilson_dirac(m=-2.0),
    "zeeman": wilson_dirac(m=-2.0, zeeman=0.3),
    "fu_kane_mele": fu_kane_mele(dt=(0.4, 0, 0, 0)),
    "ionic": atomic_insulator(),
    "ionic_spinless": atomic_insulator(spinful=False),
}


def inferred(model: LatticeModel, noisy: TightBindingModel | None = None) -> InferredInversion:
    sites = declared_sites(model.basis.positions_frac, model.crystal)
    return infer_inversion(
        noisy or model.tight_binding(),
        model.crystal,
        sites,
        np.array(model.centre),
        spinful=model.spinful,
    )


@pytest.mark.parametrize("name", MODELS)
def test_exact_models_give_the_declared_operator(name: str) -> None:
    model = MODELS[name]
    found = inferred(model)
    declared = build_inversion(model.basis, model.crystal, np.array(model.centre))
    assert found.reliability == "good", found.reason
    assert found.reason == ""
    assert found.operator is not None
    assert not found.acts_on_spin
    matrix = align_sign(found.operator, declared).matrix
    np.testing.assert_allclose(matrix, declared.matrix, atol=1e-10)
    np.testing.assert_array_equal(found.operator.shifts, declared.shifts)
    np.testing.assert_array_equal(found.operator.homes, declared.homes)
    assert found.rms_residual_mev == pytest.approx(0, abs=1e-7)
    assert found.max_residual_mev == pytest.approx(0, abs=1e-7)


@pytest.mark.parametrize("name", MODELS)
def test_noise_of_20_mev_on_every_hopping_leaves_the_operator(name: str) -> None:
    """The ionic models hop by 0.1 to 0.2 eV, and their operator stands out less for it."""
    model = MODELS[name]
    declared = build_inversion(model.basis, model.crystal, np.array(model.centre))
    for seed in range(5):
        noisy = with_noise(model.tight_binding(), 0.02, np.random.default_rng(seed))
        found = inferred(model, noisy)
        expected = ("good", "doubtful") if name.startswith("ionic") else ("good",)
        assert found.reliability in expected, found.reason
        assert found.operator is not None
        matrix = align_sign(found.operator, declared).matrix
        assert np.linalg.norm(matrix - declared.matrix, ord=2) < 0.2


def test_home_cells_are_taken_into_account() -> None:
    base = wilson_dirac(m=-2.0)
    moves = np.repeat(np.random.default_rng(0).integers(-2, 3, size=(4, 3)), 2, axis=0)
    model = with_home_cells(base, moves)
    found = inferred(model)
    declared = build_inversion(model.basis, model.crystal, np.array(model.centre))
    assert found.operator is not None
    assert found.operator.homes.any()
    np.testing.assert_array_equal(found.operator.homes, declared.homes)
    np.testing.assert_array_equal(found.operator.shifts, declared.shifts)
    np.testing.assert_allclose(
        align_sign(found.operator, declared).matrix, declared.matrix, atol=1e-10
    )


def test_orbitals_need_not_be_pure() -> None:
    """Random rotations of each site's orbitals and spin frame, as localisation may leave them."""
    model = with_mixed_orbitals(wilson_dirac(m=-2.0), np.random.default_rng(3))
    found = inferred(model)
    declared = build_inversion(model.basis, model.crystal, np.array(model.centre))
    assert found.operator is not None
    assert found.reliability == "good"
    np.testing.assert_allclose(
        align_sign(found.operator, declared).matrix, declared.matrix, atol=1e-10
    )


def test_blocks_may_act_on_spin_where_the_functions_demand_it() -> None:
    """Two sites with different spin frames: no block of the form orbital (x) 1 fits."""
    model = with_mixed_orbitals(fu_kane_mele(dt=(0.4, 0, 0, 0)), np.random.default_rng(4))
    found = inferred(model)
    assert found.acts_on_spin
    assert found.reliability == "good"
    assert found.max_residual_mev == pytest.approx(0, abs=1e-7)


def test_without_spin_orbit_the_free_blocks_would_not_be_unique() -> None:
    """Why spin is kept out of the blocks: any rotation of the spin would do as well."""
    model = kane_mele(lambda_so=0.0)
    sites = declared_sites(model.basis.positions_frac, model.crystal)
    centre = np.array(model.centre)
    free = infer_inversion(model.tight_binding(), model.crystal, sites, centre, spinful=False)
    assert free.null_space == 4
    assert inferred(model).null_space == 1


@pytest.mark.parametrize("broken_ev", [0.02, 0.1])
def test_weakly_broken_inversion_shows_in_the_residual(broken_ev: float) -> None:
    """A staggered potential of v: P H P^-1 - H is -2v, +2v on the sites, 2v in every norm."""
    model = kane_mele(lambda_v=broken_ev)
    found = inferred(model)
    assert found.operator is not None
    assert found.max_residual_mev == pytest.approx(2000 * broken_ev, rel=1e-9)
    assert found.rms_residual_mev == pytest.approx(2000 * broken_ev, rel=1e-9)


def test_strongly_broken_inversion_is_refused() -> None:
    found = inferred(kane_mele(lambda_v=0.6))
    assert found.reliability == "refused"
    assert "misses the strong bonds" in found.reason


def test_unrelated_hamiltonian_is_refused() -> None:
    made = random_inverted_model(
        np.random.default_rng(0),
        [(2, True), (2, False)],
        cell=5 * np.eye(3),
        centre=np.zeros(3),
        spinful=False,
    )
    sites = declared_sites(made.positions_frac, made.crystal)
    other = with_noise(made.model, 10.0, np.random.default_rng(1))
    found = infer_inversion(other, made.crystal, sites, np.zeros(3), spinful=False)
    assert found.reliability == "refused"
    assert found.alternatives == ()


def test_structure_without_this_inversion_is_refused() -> None:
    model = atomic_insulator()
    sites = declared_sites(model.basis.positions_frac, model.crystal)
    other = replace(model.crystal, positions_frac=np.array([[0, 0, 0], [0.5, 0.5, 0.45]]))
    found = infer_inversion(model.tight_binding(), other, sites, np.zeros(3), spinful=True)
    assert found.reliability == "refused"
    assert found.reason == "the structure has no inversion about (0, 0, 0)"
    assert found.operator is None
    bare = replace(model.crystal, symbols=(), positions_frac=np.zeros((0, 3)))
    unchecked = infer_inversion(model.tight_binding(), bare, sites, np.zeros(3), spinful=True)
    assert unchecked.reliability == "good"
    assert not unchecked.structure_checked


def _with_sites(sites: SiteAssignment, site_of: list[int]) -> SiteAssignment:
    return replace(sites, site_of=np.array(site_of))


def test_spin_pair_on_two_sites_is_refused() -> None:
    model = kane_mele()
    sites = declared_sites(model.basis.positions_frac, model.crystal)
    wrong = _with_sites(sites, [0, 1, 0, 1])
    found = infer_inversion(
        model.tight_binding(), model.crystal, wrong, np.array(model.centre), spinful=True
    )
    assert found.reliability == "refused"
    assert found.reason == "functions 1 and 2, a spin pair, sit on two sites"


def test_decoupled_set_leaves_one_sign_open() -> None:
    model = with_atomic_pair(wilson_dirac(m=-2.0), (0.5, 0.5, 0.5), 1, -8.0)
    found = inferred(model)
    declared = build_inversion(model.basis, model.crystal, np.array(model.centre))
    assert found.null_space == 2
    assert found.reliability == "good"
    assert found.operator is not None
    (other,) = found.alternatives
    signs = np.concatenate([np.ones(model.n_orb - 2), -np.ones(2)])
    both = {
        tuple(np.round(np.sign(np.vdot(op.matrix, declared.matrix * s).real) * s))
        for op in (found.operator, other)
        for s in (np.ones(model.n_orb), signs)
        if np.allclose(np.abs(np.vdot(op.matrix, declared.matrix * s)), model.n_orb)
    }
    assert len(both) == 2  # the declared relative sign, and the other one
    assert residuals_mev(model.tight_binding(), other)[1] == pytest.approx(0, abs=1e-7)


def test_overall_sign_is_a_convention() -> None:
    for name, model in MODELS.items():
        found = inferred(model)
        assert found.operator is not None
        assert np.trace(found.operator.matrix).real >= -1e-9, name


def test_residuals_are_those_of_the_inversion_test() -> None:
    model = fu_kane_mele(dt=(0.4, 0, 0, 0))
    noisy = with_noise(model.tight_binding(), 0.05, np.random.default_rng(2))
    declared = build_inversion(model.basis, model.crystal, np.array(model.centre))
    rms, largest = residuals_mev(noisy, declared)
    assert largest == pytest.approx(real_space_residual_mev(noisy, declared), rel=1e-12)
    assert rms > 0
