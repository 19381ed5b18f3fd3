"""The spin-dependent part: L.S is all of it, exchange is kept apart, frames do not matter."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from lattice_models import SIGMA, build_basis, kane_mele
from topovet.arrays import ComplexArray
from topovet.demo.lattice import l_dot_sigma
from topovet.model.basis import OrbitalBasis
from topovet.model.build_basis import spinor
from topovet.model.fourier import added_sum, build_bloch_sum
from topovet.model.spin_parts import (
    spin_dependent,
    spin_frame,
    spin_orbit_at_trim,
    spin_orbit_sum,
    spin_purity,
)
from topovet.symmetry.trim import sample_points

L_SIGMA = l_dot_sigma((2, 0, 1))


def charge(rng: np.random.Generator, n: int) -> ComplexArray:
    h = rng.normal(size=(n, n))
    return np.kron(h + h.T, np.eye(2)).astype(complex)


def test_atomic_coupling_is_separated_from_charge_and_exchange() -> None:
    rng = np.random.default_rng(3)
    h0, zeeman = charge(rng, 3), 0.3 * np.kron(np.eye(3), SIGMA[2])
    part = spin_orbit_at_trim((h0 + 0.8 * L_SIGMA + zeeman)[None])[0]
    assert part == pytest.approx(0.8 * L_SIGMA, abs=1e-12)
    assert spin_dependent(h0 + zeeman) == pytest.approx(zeeman, abs=1e-12)


def test_quantisation_axes_of_their_own_do_not_matter() -> None:
    """Each orbital's spinors along another axis: the same operator in another basis."""
    rng = np.random.default_rng(5)
    basis = build_basis([("Bi1", (0.0, 0.0, 0.0), name) for name in ("pz", "px", "py")])
    axes = Rotation.random(3, rng=rng).as_matrix()[:, 2]
    spinors = np.array([spinor(s, tuple(axis)) for axis in axes for s in (1, -1)])
    tilted = OrbitalBasis(
        basis.positions_frac, basis.harmonics, spinors, basis.labels, basis.shells
    )
    frame = spin_frame(tilted)
    assert frame is not None
    assert spin_frame(basis) is None
    h = charge(rng, 3) + 0.5 * L_SIGMA
    told = frame.conj().T @ h @ frame
    part = frame @ spin_orbit_at_trim(told[None], frame)[0] @ frame.conj().T
    assert part == pytest.approx(0.5 * L_SIGMA, abs=1e-12)


def test_kane_mele_without_its_spin_orbit_part_is_graphene() -> None:
    """lambda_so scaled by s, nu_ij and s_z hoppings, at generic k."""
    model, k = kane_mele(lambda_so=0.06), sample_points((True, True, False), 5)
    bloch = build_bloch_sum(model.tight_binding())
    change = spin_orbit_sum(bloch)
    for scale in (0.0, 0.4, 2.0):
        wanted = build_bloch_sum(kane_mele(lambda_so=0.06 * scale).tight_binding()).at(k)
        assert added_sum(bloch, change, scale - 1).at(k) == pytest.approx(wanted, abs=1e-12)


def test_functions_that_mix_the_spins_are_noticed() -> None:
    model = kane_mele(lambda_so=0.06)
    same_site = np.kron(np.eye(2), np.ones((2, 2))).astype(bool)
    pure = spin_purity(model.tight_binding(), same_site)
    # hopping of one bond kind is t, of the other lambda: 3 t^2 and 6 lambda^2 for each of two
    assert pure.hopping_ratio == pytest.approx(np.sqrt(2 * 0.06**2), rel=1e-6)
    assert (pure.onsite_ev, pure.largest_ev) == (0.0, pytest.approx(0.06))
    turn = np.eye(4, dtype=complex)
    turn[2:, 2:] = np.array([[1, 1], [-1, 1]]) / np.sqrt(2)  # spins of one site turned by 90 deg
    turned = type(model.tight_binding())(
        model.tight_binding().r_cells, turn @ model.tight_binding().h_r @ turn.conj().T, True
    )
    assert spin_purity(turned, same_site).hopping_ratio > 0.9
