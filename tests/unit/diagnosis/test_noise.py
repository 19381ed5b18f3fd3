"""Noise on every element told from terms that physically break a symmetry."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from diagnosis_subjects import PAULI_Z, inversion_of, with_onsite

from inverted_models import random_inverted_model, with_noise
from lattice_models import LatticeModel, fu_kane_mele, wilson_dirac
from topovet.diagnosis.noise import noise_against_inversion, noise_against_time_reversal
from topovet.verdict.causes_physics import NOISE_FILLED, NOISE_GROWTH

DIAMOND = fu_kane_mele(dt=(0.4, 0, 0, 0))


def spread(model: LatticeModel) -> LatticeModel:
    """Every element of H(R) filled with something that keeps all symmetries that are tested:
    numbers at rounding would be noise of their own."""
    rng = np.random.default_rng(5)
    u = np.kron(np.eye(model.n_orb // 2), np.array([[0.0, 1.0], [-1.0, 0.0]]))
    filling = rng.normal(size=(*model.h_r.shape, 2)) @ np.array([1e-3, 1e-3j])
    filling += filling[::-1].conj().transpose(0, 2, 1)
    filling += u @ filling.conj() @ u.T
    return replace(model, h_r=model.h_r + filling)


@pytest.mark.parametrize("size_ev", [1e-4, 5e-3])
def test_noise_fills_every_element_and_its_size_is_found(size_ev: float) -> None:
    noisy = with_noise(DIAMOND.tight_binding(), size_ev, np.random.default_rng(1))
    for found in (
        noise_against_time_reversal(noisy),
        noise_against_inversion(noisy, inversion_of(DIAMOND)),
    ):
        assert found.filled > NOISE_FILLED
        assert found.growth is not None
        assert abs(found.growth) < NOISE_GROWTH
        # sigma from some hundreds of draws: a tenth of it, and R at the rim have no partner
        assert found.sigma_mev == pytest.approx(1000 * size_ev, rel=0.2)


def test_moment_sits_on_few_elements() -> None:
    """A Zeeman field on every site of a Hamiltonian without a single zero."""
    full = spread(wilson_dirac(m=-2.0))
    magnetic = with_onsite(full, 0.01 * np.kron(np.eye(full.n_orb // 2), PAULI_Z))
    found = noise_against_time_reversal(magnetic.tight_binding())
    assert found.of == "time reversal"
    assert found.filled < 0.1


def test_staggered_potential_sits_on_few_elements() -> None:
    staggered = with_onsite(DIAMOND, np.kron(PAULI_Z, np.eye(2)) * 0.05)
    found = noise_against_inversion(staggered.tight_binding(), inversion_of(DIAMOND))
    assert found.of == "inversion"
    assert found.filled < NOISE_FILLED


def test_scaled_hoppings_grow_with_their_size() -> None:
    """Strain: hoppings that leave the cell along a1 scaled, sites that change places across it."""
    made = random_inverted_model(
        np.random.default_rng(2),
        [(2, True), (2, True)],
        cell=5 * np.eye(3),
        centre=np.zeros(3),
        spinful=False,
        move_homes=True,
    )
    sound = noise_against_inversion(made.model, made.operator)
    assert sound.sigma_mev == pytest.approx(0, abs=1e-9)
    leaves = (made.model.r_cells[:, 0] != 0)[:, None, None]
    strained = replace(made.model, h_r=np.where(leaves, 1.02, 1.0) * made.model.h_r)
    found = noise_against_inversion(strained, made.operator)
    assert found.growth is not None
    assert found.growth > NOISE_GROWTH
    noisy = with_noise(made.model, 0.01, np.random.default_rng(1))
    by_noise = noise_against_inversion(noisy, made.operator)
    assert by_noise.growth is not None
    assert by_noise.growth < NOISE_GROWTH


def test_equal_elements_tell_nothing() -> None:
    """Where all hoppings are equally strong, scaled ones cannot be told from noise."""
    staggered = with_onsite(DIAMOND, np.kron(PAULI_Z, np.eye(2)) * 0.05)
    assert noise_against_inversion(staggered.tight_binding(), inversion_of(DIAMOND)).growth is None


def test_what_holds_is_no_noise() -> None:
    sound = DIAMOND.tight_binding()
    assert noise_against_time_reversal(sound).sigma_mev == pytest.approx(0, abs=1e-9)
    against = noise_against_inversion(sound, inversion_of(DIAMOND))
    assert against.sigma_mev == pytest.approx(0, abs=1e-9)


def test_nothing_at_all_is_filled_by_nothing() -> None:
    empty = replace(DIAMOND.tight_binding(), h_r=np.zeros_like(DIAMOND.tight_binding().h_r))
    found = noise_against_time_reversal(empty)
    assert (found.sigma_mev, found.filled) == (0.0, 0.0)
