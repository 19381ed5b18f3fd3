"""Landau levels and Onsager's areas against a lattice in an exact magnetic field."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import constants

from topovet.boundary.observables import (
    M_PER_S_OF_EV_ANG,
    band_level_ev,
    crossover_temperature_k,
    dirac_levels_ev,
    oscillation_frequency_t,
    quantised_area_ang2,
    sheet_density_ang2,
    velocity_m_s,
)
from topovet.units import BOLTZMANN_EV_PER_K, MAGNETIC_LENGTH_ANG_AT_1_T

SIGMA_X = np.array([[0, 1], [1, 0]], dtype=complex)
SIGMA_Y = np.array([[0, -1j], [1j, 0]])
SIGMA_Z = np.diag([1.0, -1.0]).astype(complex)


def single_cone_levels(q: int) -> np.ndarray:
    """Levels of sin k_x s_x + sin k_y s_y + (2 - cos k_x - cos k_y) s_z with flux 1/q a cell.

    The lattice model of Qi, Wu, Zhang at its critical mass has one massless cone, at k = 0, of
    slope 1, and 2 or 4 at the other invariant momenta. Peierls phases in the Landau gauge,
    A_y = B x: a magnetic cell of q sites along x, solved exactly at the centre of its zone.
    """
    h = np.zeros((q, 2, q, 2), dtype=complex)
    hop_x = (-SIGMA_Z + SIGMA_X / 1j) / 2  # exp(i k_x) part
    for x in range(q):
        k_y = 2 * np.pi * x / q
        h[x, :, x, :] += np.sin(k_y) * SIGMA_Y + (2 - np.cos(k_y)) * SIGMA_Z
        h[x, :, (x + 1) % q, :] += hop_x
        h[(x + 1) % q, :, x, :] += hop_x.conj().T
    return np.linalg.eigvalsh(h.reshape(2 * q, 2 * q))


def _off(q: int, n: int) -> float:
    """Relative difference of the n-th level, mean of both signs, from the formula."""
    levels = single_cone_levels(q)
    # 2 pi flux a^2 = (a / l_B)^2: the field in tesla for a = 1 angstrom
    field = 2 * np.pi / q * MAGNETIC_LENGTH_ANG_AT_1_T**2
    expected = float(dirac_levels_ev(1.0, field, np.array([n]))[0])
    above = np.sort(levels[levels > 0.25 * expected])
    below = np.sort(-levels[levels < -0.25 * expected])
    # next to the zone boundary of the gauge every level appears once in a cell of flux 1
    return abs((above[n - 1] + below[n - 1]) / 2 / expected - 1)


@pytest.mark.parametrize("n", [1, 2, 3])
def test_dirac_levels_of_a_lattice_in_a_field(n: int) -> None:
    """Within one per cent at a flux of 1/400 a cell, and better as the flux falls.

    Source of the formula: Castro Neto et al., Rev. Mod. Phys. 81, 109 (2009),
    doi:10.1103/RevModPhys.81.109; of the field on the lattice: Hofstadter, PRB 14, 2239 (1976),
    doi:10.1103/PhysRevB.14.2239.
    """
    off = [_off(q, n) for q in (50, 100, 200, 400)]
    assert off == sorted(off, reverse=True)
    assert off[-1] < 0.01


def test_areas_of_the_lattice_band_give_its_levels() -> None:
    """2 pi n / l_B^2 on the band itself, where a straight cone is off by several times as much."""
    q, n = 100, np.array([2, 3, 4])
    levels = single_cone_levels(q)
    k = np.linspace(-np.pi, np.pi, 1601)
    x, y = np.meshgrid(k, k)
    energy = np.sqrt(np.sin(x) ** 2 + np.sin(y) ** 2 + (2 - np.cos(x) - np.cos(y)) ** 2)
    asked = np.linspace(0.05, 1.0, 40)
    areas = np.array([(energy < e).sum() for e in asked]) * (k[1] - k[0]) ** 2
    field = 2 * np.pi / q * MAGNETIC_LENGTH_ANG_AT_1_T**2
    by_area = [band_level_ev(asked, areas, quantised_area_ang2(field, m)) for m in n]
    straight = dirac_levels_ev(1.0, field, n)
    first = 0.25 * straight[0]
    above, below = np.sort(levels[levels > first]), np.sort(-levels[levels < -first])
    exact = (above[n - 1] + below[n - 1]) / 2
    off_area = np.abs(np.array(by_area) / exact - 1)
    assert off_area.max() < 0.01
    assert band_level_ev(asked, areas, 1e3) is None
    assert band_level_ev(asked[:1], areas[:1], 0.01) is None


def test_first_level_of_graphene() -> None:
    """36 meV sqrt(B / 1 T) at 1e6 m/s: Castro Neto et al. (2009), section III (from memory)."""
    slope = 1e6 / M_PER_S_OF_EV_ANG
    assert 1e3 * dirac_levels_ev(slope, 1.0, np.array([1]))[0] == pytest.approx(36.3, abs=0.1)
    assert velocity_m_s(slope) == pytest.approx(1e6)


def test_frequency_of_a_circle() -> None:
    """F = hbar k_F^2 / 2e (Shoenberg 1984), with scipy's constants."""
    k_f = 0.05
    expected = constants.hbar * (k_f * 1e10) ** 2 / (2 * constants.e)
    assert oscillation_frequency_t(np.pi * k_f**2) == pytest.approx(expected, rel=1e-6)
    # n = F / (e / h) carriers fill a band without spin degeneracy
    density = expected * constants.e / constants.h
    assert sheet_density_ang2(np.pi * k_f**2) * 1e20 == pytest.approx(density, rel=1e-6)
    assert quantised_area_ang2(2.0, 3, intercept=0.5) == pytest.approx(
        2 * np.pi * constants.e * 2.0 * 3.5 / constants.hbar * 1e-20, rel=1e-6
    )


def test_crossover_is_where_the_two_sheets_are_equal() -> None:
    gap, thickness, bulk, surface = 0.3, 1000.0, 1e-5, 2e-4
    t = crossover_temperature_k(gap, thickness, bulk, surface)
    excited = bulk * np.exp(-gap / (2 * BOLTZMANN_EV_PER_K * t)) * thickness
    assert excited == pytest.approx(surface)
    assert crossover_temperature_k(gap, 10.0, bulk, surface) == np.inf
