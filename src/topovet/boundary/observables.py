"""From a surface band to what an experiment would see: formulas, no Hamiltonians.

References
----------
Onsager, Phil. Mag. 43, 1006 (1952), doi:10.1080/14786440908521019 (area quantisation)
Shoenberg, Magnetic Oscillations in Metals (Cambridge University Press, 1984), section 2.3
Castro Neto et al., Rev. Mod. Phys. 81, 109 (2009), doi:10.1103/RevModPhys.81.109 (Dirac levels)
Wright, McKenzie, PRB 87, 085411 (2013), doi:10.1103/PhysRevB.87.085411 (what moves the intercept)
"""

from __future__ import annotations

import math

import numpy as np
from scipy.interpolate import PchipInterpolator

from topovet.arrays import FloatArray
from topovet.units import BOLTZMANN_EV_PER_K, HBAR_EV_S, MAGNETIC_LENGTH_ANG_AT_1_T

M_PER_S_OF_EV_ANG = 1e-10 / HBAR_EV_S
"""Metres per second of a slope of 1 eV angstrom."""


def velocity_m_s(slope_ev_ang: float) -> float:
    """Group velocity of a slope dE/dk."""
    return slope_ev_ang * M_PER_S_OF_EV_ANG


def oscillation_frequency_t(area_ang2: float) -> float:
    """Onsager's frequency hbar A / (2 pi e) in tesla, of an area in 1/angstrom^2."""
    # hbar / e = l_B^2 B
    return MAGNETIC_LENGTH_ANG_AT_1_T**2 * area_ang2 / (2 * math.pi)


def dirac_levels_ev(slope_ev_ang: float, field_t: float, n: FloatArray) -> FloatArray:
    """sgn(n) v sqrt(2 e hbar B |n|), eV from the Dirac point."""
    length = MAGNETIC_LENGTH_ANG_AT_1_T / math.sqrt(field_t)
    n = np.asarray(n, dtype=float)
    return np.asarray(np.sign(n) * slope_ev_ang * np.sqrt(2 * np.abs(n)) / length)


def quantised_area_ang2(field_t: float, n: float, *, intercept: float = 0.0) -> float:
    """Area of the n-th orbit, 2 pi e B (n + intercept) / hbar; intercept 0 for a Dirac cone."""
    return 2 * math.pi * field_t * (n + intercept) / MAGNETIC_LENGTH_ANG_AT_1_T**2


def band_level_ev(
    energies_ev: FloatArray, areas_ang2: FloatArray, area_ang2: float
) -> float | None:
    """Energy, from the Dirac point, of an orbit of this area on the band as it is.

    Parameters
    ----------
    energies_ev, areas_ang2
        (n,) contours on one side of the Dirac point, energies from there.
    area_ang2
        To look for; None is returned beyond the largest one known.
    """
    order = np.argsort(areas_ang2)
    # the square root of the area is nearly linear in energy, and 0 at the Dirac point
    k = np.sqrt(np.concatenate([[0.0], np.asarray(areas_ang2)[order]]))
    energy = np.concatenate([[0.0], np.asarray(energies_ev)[order]])
    if len(k) < 3 or math.sqrt(area_ang2) > k[-1] or np.any(np.diff(k) <= 0):
        return None
    return float(PchipInterpolator(k, energy)(math.sqrt(area_ang2)))


def sheet_density_ang2(area_ang2: float) -> float:
    """Carriers per angstrom^2 of one face: a band without spin degeneracy fills A / (2 pi)^2."""
    return area_ang2 / (2 * math.pi) ** 2


def crossover_temperature_k(
    gap_ev: float, thickness_ang: float, bulk_density_ang3: float, surface_density_ang2: float
) -> float:
    """Below this a surface sheet conducts better than the thermally excited bulk of a film.

    e mu_b N exp(-E_g / 2 k T) t = e mu_s n_s, with equal mobilities, or with N and n_s weighted by
    them: T = E_g / (2 k ln(N t / n_s)); infinite where the surface wins at every temperature.

    Parameters
    ----------
    gap_ev
        Smallest gap, direct or not, positive.
    thickness_ang
        Of the film.
    bulk_density_ang3
        N, the prefactor of the excited carriers.
    surface_density_ang2
        n_s of both faces together.
    """
    ratio = bulk_density_ang3 * thickness_ang / surface_density_ang2
    return math.inf if ratio <= 1.0 else gap_ev / (2 * BOLTZMANN_EV_PER_K * math.log(ratio))
