"""Physical constants and unit conversions (energies in eV, lengths in angstrom)."""

from __future__ import annotations

BOHR_ANGSTROM = 0.529177210903
"""Bohr radius in angstrom, CODATA 2018."""

MEV_PER_EV = 1000.0

METRE_PER_SECOND = 1e-10 / 6.582119569e-16
"""Velocity in m/s of a slope of 1 eV angstrom: 1/hbar, hbar = 6.582119569e-16 eV s (exact in the SI
of 2019 to the digits given)."""

BOLTZMANN_EV_PER_K = 8.617333262e-5
"""Boltzmann constant in eV/K, exact in the SI of 2019 to the digits given."""

KT_ROOM_MEV = MEV_PER_EV * BOLTZMANN_EV_PER_K * 300.0
"""kT at 300 K in meV (25.85)."""

HBAR_EV_S = 6.582119569e-16
"""Reduced Planck constant in eV s, exact in the SI of 2019 to the digits given."""

MAGNETIC_LENGTH_ANG_AT_1_T = 256.5564
"""sqrt(hbar / (e B)) at 1 T in angstrom."""

HBAR2_OVER_ELECTRON_MASS = 7.619964
"""hbar^2 / m_e in eV angstrom^2, CODATA 2018."""
