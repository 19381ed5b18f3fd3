"""Half-crystals: decimation against long slabs, end states, sum rules, and the fast route."""

from __future__ import annotations

import numpy as np
import pytest

from boundary_models import prepared, ssh_chain
from chern_models import random_model
from lattice_models import bhz, wilson_dirac
from topovet.boundary.greens import decimate, greens_functions
from topovet.boundary.layers import principal_blocks
from topovet.boundary.many_energies import face_densities, factors
from topovet.boundary.slab import slab_hamiltonian


def _half(model, miller, k, energy):
    _, _, stack = prepared(model, miller)
    inside, across = principal_blocks(stack.planes_at(np.array([k])))
    energy = np.atleast_1d(energy)
    n = len(energy)
    return stack, decimate(np.repeat(inside, n, 0), np.repeat(across, n, 0), energy)


@pytest.mark.parametrize("ratio", [0.2, 0.6, 0.9])
def test_ssh_end_state(ratio: float) -> None:
    """Weight 1 - (v/w)^2 of the pole on the end site; the other site of the cell has none of it."""
    model = ssh_chain(v=ratio, w=1.0)
    eta = 1e-7
    _, found = _half(model, (0, 1, 0), (0.3, 0.0), 1j * eta)
    g = greens_functions(np.array([1j * eta]), found.upper)[0]
    assert -eta * g[0, 0].imag == pytest.approx(1 - ratio**2, rel=1e-6)
    assert abs(eta * g[1, 1].imag) < 1e-6
    # the same cut of the other phase has no level in the gap
    _, trivial = _half(ssh_chain(v=1.0, w=ratio), (0, 1, 0), (0.3, 0.0), 1j * eta)
    g = greens_functions(np.array([1j * eta]), trivial.upper)[0]
    assert np.abs(eta * g).max() < 1e-5


def test_ssh_decay_length() -> None:
    """|psi|^2 falls by (v/w)^2 per cell: ln(w/v) per cell for the amplitude."""
    v, w, n = 0.5, 1.0, 40
    _, _, stack = prepared(ssh_chain(v=v, w=w), (0, 1, 0))
    h = slab_hamiltonian(stack.planes_at(np.zeros((1, 2))), n)[0]
    _, states = np.linalg.eigh(h)
    # the two end states mix; their weights on the two sublattices do not
    weight = (np.abs(states[:, n - 1 : n + 1]) ** 2).sum(axis=1)
    on_a = weight[0::2][:12]
    assert np.log(on_a[:-1] / on_a[1:]) == pytest.approx(2 * np.log(w / v), rel=1e-6)


@pytest.mark.parametrize("miller", [(0, 0, 1), (1, 1, 0)])
def test_decimation_equals_a_long_slab(miller) -> None:
    model = random_model(2, inversion=False)
    k, energy = (0.13, 0.31), 0.2 + 1.5j  # broad: the far face of the slab is out of sight
    stack, found = _half(model, miller, k, energy)
    n_planes = 40 * stack.reach
    h = slab_hamiltonian(stack.planes_at(np.array([k])), n_planes)[0]
    g = np.linalg.inv(energy * np.eye(len(h)) - h)
    size, e = stack.layer_size, np.array([energy])
    assert greens_functions(e, found.upper)[0] == pytest.approx(g[:size, :size], abs=1e-8)
    assert greens_functions(e, found.lower)[0] == pytest.approx(g[-size:, -size:], abs=1e-8)
    middle = slice(20 * size, 21 * size)
    assert greens_functions(e, found.bulk)[0] == pytest.approx(g[middle, middle], abs=1e-8)


def test_a_real_energy_in_a_band_does_not_converge() -> None:
    model = ssh_chain(v=0.5, w=1.0)
    _, found = _half(model, (0, 1, 0), (0.0, 0.0), np.array([0.123, 0.9]))
    assert found.converged.tolist() == [True, False]


def test_green_is_hermitian_in_the_gap() -> None:
    _, found = _half(wilson_dirac(m=-2.0), (1, 1, 0), (0.1, 0.05), 0.05)
    skew = found.upper - found.upper.conj().transpose(0, 2, 1)
    assert np.abs(skew).max() < 1e-9
    assert found.converged.all()


@pytest.mark.parametrize("negligible", [0.0, 1e-3])
@pytest.mark.parametrize("plain_from", [0.0, 1.1])
def test_both_routes_equal_decimation(negligible: float, plain_from: float, monkeypatch) -> None:
    monkeypatch.setattr("topovet.boundary.many_energies.PLAIN_FROM", plain_from)
    model = random_model(4, inversion=False)
    _, _, stack = prepared(model, (1, 2, 0))
    inside, across = principal_blocks(stack.planes_at(np.array([[0.2, 0.37]])))
    energy = np.linspace(-4, 4, 9) + 0.1j
    upper, lower = face_densities(
        inside[0], across[0], energy, stack.n_orb, negligible_ev=negligible
    )
    found = decimate(np.repeat(inside, 9, 0), np.repeat(across, 9, 0), energy)
    n = stack.n_orb
    tolerance = 1e-9 if negligible == 0 else 0.1
    for face, effective, rows in (
        (upper, found.upper, slice(0, n)),
        (lower, found.lower, slice(stack.layer_size - n, None)),
    ):
        g = greens_functions(energy, effective)[:, rows, rows]
        rho = 1j * (g - g.conj().transpose(0, 2, 1)) / (2 * np.pi)
        same = rho.diagonal(axis1=1, axis2=2).real
        assert face.same == pytest.approx(same, abs=tolerance)
        flip = rho[:, np.arange(1, n, 2), np.arange(0, n, 2)]
        assert face.flip == pytest.approx(flip, abs=tolerance)


def test_factors_give_the_coupling_back() -> None:
    rng = np.random.default_rng(7)
    low_rank = rng.normal(size=(12, 3)) @ rng.normal(size=(3, 12)) + 0j
    a, b = factors(low_rank, 1e-9)
    assert a.shape == (12, 3)
    assert a @ b.conj().T == pytest.approx(low_rank, abs=1e-12)


def test_spectral_density_adds_up_to_one_per_orbital() -> None:
    """The integral over all energies of -Im G_mm / pi is 1, whatever the surface."""
    _, _, stack = prepared(bhz(m=1.0), (0, 1, 0))
    inside, across = principal_blocks(stack.planes_at(np.array([[0.15, 0.0]])))
    # E = 8 tan(t) maps the line to an interval, with points enough where the levels are
    t = (np.arange(4000) + 0.5) / 4000 * np.pi - np.pi / 2
    measure = 8 * np.pi / 4000 / np.cos(t) ** 2
    upper, lower = face_densities(
        inside[0], across[0], 8 * np.tan(t) + 0.2j, stack.n_orb, negligible_ev=0.0
    )
    for face in (upper, lower):
        assert (face.same * measure[:, None]).sum(axis=0) == pytest.approx(1.0, abs=1e-4)
        assert face.same.min() > 0
