"""Residuals that hold at every k, and the group that an allowance can pay for."""

from __future__ import annotations

import numpy as np
import pytest

from lattice_models import kane_mele, wilson_dirac
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel
from topovet.spectrum.proof.symmetry_use import (
    Images,
    affordable_images,
    images_of,
    residual_everywhere,
    time_reversal_residual,
)
from topovet.symmetry.hopping import transformed_at
from topovet.symmetry.operators import build_operator

IDENTITY = np.eye(3, dtype=np.int64)
FOURFOLD = np.array([[0, -1, 0], [1, 0, 0], [0, 0, 1]])


def _noisy(model: TightBindingModel, size: float) -> TightBindingModel:
    rng = np.random.default_rng(0)
    noise = rng.normal(size=(*model.h_r.shape, 2)) @ np.array([1, 1j])
    noise = size * (noise + noise[::-1].conj().transpose(0, 2, 1))
    return TightBindingModel(model.r_cells, model.h_r + noise, model.spinful)


@pytest.mark.parametrize("rotation", [FOURFOLD, -IDENTITY, -FOURFOLD])
@pytest.mark.parametrize("size", [0.0, 1e-4])
def test_residual_is_above_what_is_met(rotation: np.ndarray, size: float) -> None:
    lattice = wilson_dirac(m=-2.0)
    model = _noisy(lattice.tight_binding(), size)
    bloch = build_bloch_sum(model)
    operator = build_operator(lattice.basis, lattice.crystal, rotation, np.zeros(3))
    k = np.random.default_rng(1).random((200, 3))
    moved = transformed_at(bloch.at(k), operator, k) - bloch.at(k @ operator.k_rotation)
    met = float(np.linalg.norm(moved, ord=2, axis=(1, 2)).max())
    bound = residual_everywhere(model, operator)
    assert met <= bound + 1e-12
    assert bound <= 8 * met + 1e-12
    energies = np.linalg.eigvalsh(bloch.at(k)) - np.linalg.eigvalsh(
        bloch.at(k @ operator.k_rotation)
    )
    assert np.abs(energies).max() <= bound + 1e-12


@pytest.mark.parametrize("size", [0.0, 1e-4])
def test_time_reversal_residual_is_above_what_is_met(size: float) -> None:
    model = _noisy(kane_mele(lambda_r=0.02).tight_binding(), size)
    bloch = build_bloch_sum(model)
    k = np.random.default_rng(1).random((200, 3)) * [1, 1, 0]
    met = np.abs(np.linalg.eigvalsh(bloch.at(k)) - np.linalg.eigvalsh(bloch.at(-k))).max()
    bound = time_reversal_residual(model)
    assert met <= bound + 1e-12
    assert (bound < 1e-12) == (size == 0.0)


def test_products_with_time_reversal_add_their_residuals() -> None:
    lattice = wilson_dirac(m=-2.0)
    model = _noisy(lattice.tight_binding(), 1e-4)
    operator = build_operator(lattice.basis, lattice.crystal, FOURFOLD, np.zeros(3))
    images = images_of(model, [operator], time_reversal=True)
    found = {m.tobytes(): r for m, r in zip(images.matrices, images.residuals_ev, strict=True)}
    own, reversal = residual_everywhere(model, operator), time_reversal_residual(model)
    assert found[operator.k_rotation.tobytes()] == own
    assert found[(-operator.k_rotation).tobytes()] == own + reversal
    assert found[IDENTITY.tobytes()] == 0.0


def test_largest_group_within_the_allowance() -> None:
    quarter = FOURFOLD
    half, back = quarter @ quarter, quarter @ quarter @ quarter
    images = Images(np.array([IDENTITY, half, quarter, back]), np.array([0.0, 0.1, 0.3, 0.2]))
    sizes = [len(affordable_images(images, a).matrices) for a in (0.05, 0.15, 0.25, 0.35)]
    assert sizes == [1, 2, 2, 4]  # a quarter turn without its inverse is no group
    assert affordable_images(images, 0.25).worst_ev == 0.1


def test_a_set_that_is_no_group_is_reduced_to_one() -> None:
    images = Images(np.array([IDENTITY, FOURFOLD]), np.array([0.0, 0.0]))
    assert len(affordable_images(images, 1.0).matrices) == 1
