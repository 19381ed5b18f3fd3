"""Physical constants and unit conversions (energies in eV, lengths in angstrom)."""

from __future__ import annotations

BOHR_ANGSTROM = 0.529177210903
"""Bohr radius in angstrom, CODATA 2018."""

MEV_PER_EV = 1000.0
