"""Inversion in the Wannier basis: closure, images in other cells, residuals in k and R."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from lattice_models import fu_kane_mele, wilson_dirac
from topovet.errors import NoInversionError
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel, build_model
from topovet.model.hybrids import harmonic_coefficients
from topovet.symmetry.inversion import (
    build_inversion,
    inversion_at,
    inversion_residual,
    inverted_hopping,
    measure_inversion,
    real_space_residual_mev,
)

CUBE = Crystal(4 * np.eye(3), ("X",), np.zeros((1, 3)))


def _basis(
    functions: list[tuple[int, int]], position: tuple[float, ...] = (0, 0, 0)
) -> OrbitalBasis:
    n = len(functions)
    return OrbitalBasis(
        np.tile(np.array(position, dtype=float), (n, 1)),
        np.array([harmonic_coefficients(l, mr) for l, mr in functions]),
        np.tile(np.array([1.0 + 0j, 0.0]), (n, 1)),
        tuple(f"X1 {l} {mr}" for l, mr in functions),
        np.ones(n, dtype=np.int64),
    )


def test_parity_of_real_harmonics_is_minus_one_to_the_l() -> None:
    functions = [(0, 1), (1, 2), (2, 3), (3, 4)]
    operator = build_inversion(_basis(functions), CUBE, np.zeros(3))
    np.testing.assert_allclose(operator.matrix, np.diag([1, -1, 1, -1]), atol=1e-14)


def test_whole_hybrid_set_is_closed_a_part_is_not() -> None:
    whole = [(-3, mr) for mr in range(1, 5)]
    operator = build_inversion(_basis(whole), CUBE, np.zeros(3))
    np.testing.assert_allclose(
        sorted(np.linalg.eigvalsh(operator.matrix)), [-1, -1, -1, 1], atol=1e-12
    )
    with pytest.raises(NoInversionError, match="not closed under inversion"):
        build_inversion(_basis(whole[:3]), CUBE, np.zeros(3))


def test_site_without_image_is_named() -> None:
    with pytest.raises(NoInversionError, match=r"site of X1 0 1 0\.800 angstrom away"):
        build_inversion(_basis([(0, 1)], (0.1, 0, 0)), CUBE, np.zeros(3))


def test_two_shells_of_one_kind_do_not_mix() -> None:
    twice = _basis([(0, 1), (0, 1)])
    with pytest.raises(NoInversionError, match="not closed"):
        build_inversion(twice, CUBE, np.zeros(3))
    apart = replace(twice, shells=np.array([1, 2]))
    np.testing.assert_allclose(build_inversion(apart, CUBE, np.zeros(3)).matrix, np.eye(2))


def test_image_in_another_cell_gets_its_phase() -> None:
    basis = _basis([(0, 1)], (0.75, 0.0, 0.0))
    operator = build_inversion(basis, CUBE, np.array([0.25, 0.5, 0.0]))
    assert operator.shifts.tolist() == [[-1, 1, 0]]
    k = np.array([[0.1, 0.2, 0.3]])
    np.testing.assert_allclose(inversion_at(operator, k), [[[np.exp(2j * np.pi * 0.1)]]])


@pytest.mark.parametrize("model", [fu_kane_mele(), wilson_dirac(m=-2.0)], ids=["fcc", "cubic"])
def test_exact_models_have_no_residual_anywhere(model: object) -> None:
    built = build_model(model.r_cells, model.h_r, spinful=True)  # type: ignore[attr-defined]
    bloch = build_bloch_sum(built)
    operator = build_inversion(model.basis, model.crystal, model.centre)  # type: ignore[attr-defined]
    test = measure_inversion(built, bloch, operator, model.crystal.periodic)  # type: ignore[attr-defined]
    assert test.violation_mev == pytest.approx(0, abs=1e-9)
    assert test.violation_r_mev == pytest.approx(0, abs=1e-9)
    assert test.violation_trim_mev == pytest.approx(0, abs=1e-9)


def test_residual_in_k_is_the_fourier_sum_of_that_in_r() -> None:
    """P H P^-1 made in real space, summed at -k, equals D(k) H(k) D(k)†."""
    model = fu_kane_mele()
    rng = np.random.default_rng(2)
    noise = rng.normal(size=model.h_r.shape) + 1j * rng.normal(size=model.h_r.shape)
    built = build_model(model.r_cells, model.h_r + 0.02 * noise, spinful=True)
    bloch = build_bloch_sum(built)
    operator = build_inversion(model.basis, model.crystal, model.centre)
    r_new, h_new = inverted_hopping(built, operator)
    k = rng.random((5, 3))
    summed = np.einsum("kr,rmn->kmn", np.exp(-2j * np.pi * k @ r_new.T), h_new)
    np.testing.assert_allclose(
        summed - bloch.at(-k), inversion_residual(bloch, operator, k), atol=1e-12
    )


def test_real_space_residual_sees_a_single_odd_hopping() -> None:
    model = wilson_dirac(m=-2.0)
    built = build_model(model.r_cells, model.h_r, spinful=True)
    operator = build_inversion(model.basis, model.crystal, model.centre)
    h = built.h_r.copy()
    origin = len(h) // 2
    even, odd = 0, int(np.argmax(np.abs(model.basis.harmonics[:, 1])))
    h[origin, even, odd] += 0.03
    h[origin, odd, even] += 0.03
    broken = TightBindingModel(built.r_cells, h, True)
    assert real_space_residual_mev(broken, operator) == pytest.approx(60, rel=1e-6)
