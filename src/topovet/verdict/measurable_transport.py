"""Oscillations, Landau levels and the surface's share of the current, from a cone's contours."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from topovet.boundary.cone_results import Cone, Contour
from topovet.boundary.observables import (
    band_level_ev,
    crossover_temperature_k,
    dirac_levels_ev,
    oscillation_frequency_t,
    quantised_area_ang2,
    sheet_density_ang2,
    velocity_m_s,
)
from topovet.spectrum.results import GapSample
from topovet.units import MEV_PER_EV

FIELDS_T = (1.0, 2.0, 3.0, 4.0, 6.0, 8.0, 10.0, 12.0, 14.0, 16.0)
LEVELS = (-2, -1, 0, 1, 2, 3, 4)
"""Fields and indices of the table of Landau levels."""

SPOILED = 0.1
"""The formula of a straight cone counts as spoiled where the band's own level differs by more."""

THICKNESS_NM = (10.0, 50.0, 200.0, 1000.0, 100_000.0)
"""Films, and a flake of 0.1 mm."""

PREFACTOR_CM3 = (1e18, 1e19, 1e20)
"""Carriers of the bulk before exp(-E_g / 2kT), times their mobility over that of the surface:
least, middle and most. 2 (m kT / 2 pi hbar^2)^(3/2) is 10^19 per cm^3 for half an electron mass at
300 K; a factor of ten either way covers other masses and mobilities (practice)."""

HOTTEST_K = 500.0
"""Temperatures beyond are not told apart."""

ANG3_PER_CM3 = 1e-24
ANG2_PER_CM2 = 1e-16


def oscillation_block(cone: Cone, gap: GapSample) -> list[dict[str, Any]]:
    """One entry for each contour that closes within the surface band."""
    return [_oscillation(c, cone, gap) for c in cone.contours]


def _oscillation(contour: Contour, cone: Cone, gap: GapSample) -> dict[str, Any]:
    k, speeds = contour.k_ang, [velocity_m_s(v) for v in contour.velocity_ev_ang]
    inside = gap.vbm_ev < contour.energy_ev < gap.cbm_ev
    return {
        "fermi_energy_eV": contour.energy_ev,
        "above_dirac_point_meV": MEV_PER_EV * (contour.energy_ev - cone.pair.energy_ev),
        "k_F_per_ang": math.sqrt(contour.area_ang2 / math.pi),
        "k_F_min_per_ang": float(k.min()),
        "k_F_max_per_ang": float(k.max()),
        "velocity_m_s": float(np.mean(np.abs(speeds))),
        "frequency_T": oscillation_frequency_t(contour.area_ang2),
        "cyclotron_mass_m_e": contour.mass_m_e,
        "carriers_per_cm2": sheet_density_ang2(contour.area_ang2) / ANG2_PER_CM2,
        "bulk_carriers_too": not inside,
    }


def landau_block(cone: Cone) -> dict[str, Any]:
    """Levels by the formula of a straight cone and by the area that the band encloses."""
    slope = float(np.mean(cone.velocity_ev_ang))
    levels = []
    for field in FIELDS_T:
        straight = dirac_levels_ev(slope, field, np.array(LEVELS))
        for n, energy in zip(LEVELS, straight, strict=True):
            band = _on_the_band(cone, field, n)
            levels.append(
                {
                    "field_T": field,
                    "n": n,
                    "straight_cone_meV": MEV_PER_EV * float(energy),
                    "band_meV": None if band is None else MEV_PER_EV * band,
                    "straight_cone_fails": (
                        None
                        if band is None or n == 0
                        else abs(band - float(energy)) > SPOILED * abs(band)
                    ),
                }
            )
    return {
        "landau_levels": levels,
        "landau_intercept": {
            "expected": 0.5,
            "assumptions": [
                "levels from the Dirac point: sgn(n) v sqrt(2 e hbar B |n|) with the slope there; "
                "band_meV: the area of the band as followed, quantised as 2 pi e B n / hbar",
                "Zeeman energy left out: it moves n = 0 by g mu_B B / 2 and bends the ladder",
                "intercept 1/2 for the Berry phase pi of a cone; curvature and Zeeman energy move "
                "what a fan of few indices extrapolates to, so that it is no proof by itself",
            ],
        },
    }


def _on_the_band(cone: Cone, field: float, n: int) -> float | None:
    if n == 0:
        return 0.0
    sign = 1 if n > 0 else -1
    of_sign = [c for c in cone.contours if sign * (c.energy_ev - cone.pair.energy_ev) > 0]
    energies = np.array([c.energy_ev - cone.pair.energy_ev for c in of_sign])
    areas = np.array([c.area_ang2 for c in of_sign])
    return band_level_ev(energies, areas, quantised_area_ang2(field, abs(n)))


def surface_channel_block(cone: Cone, gap: GapSample, error_ev: float) -> dict[str, Any]:
    """Temperature below which the two faces of a film conduct better than its bulk."""
    width = gap.cbm_ev - gap.vbm_ev
    assumptions = [
        "sheet of the surface e mu n_s, independent of temperature, on two faces, against a bulk "
        "e mu_b N exp(-E_g / 2kT) of an undoped crystal",
        "N mu_b / mu_s = 1e19 per cm^3; the range takes 1e18 to 1e20 and the gap twice the known "
        "errors up or down",
        "carriers of real crystals' own defects are left out: they can short this at any "
        "temperature",
    ]
    inside = [c for c in cone.contours if gap.vbm_ev < c.energy_ev < gap.cbm_ev]
    if width <= 0 or not inside:
        why = (
            "the bulk bands overlap: the bulk carries at every temperature"
            if width <= 0
            else "no contour of the surface band closes at an energy between the bulk edges"
        )
        return {"films": [], "reason": why, "assumptions": assumptions}
    middle = 0.5 * (gap.vbm_ev + gap.cbm_ev)
    contour = min(inside, key=lambda c: abs(c.energy_ev - middle))
    density = sheet_density_ang2(contour.area_ang2)
    films = []
    for thickness in THICKNESS_NM:
        low, centre, high = (
            _below_hottest(
                crossover_temperature_k(
                    max(width + shift, 1e-6), 10 * thickness, n * ANG3_PER_CM3, 2 * density
                )
            )
            for n, shift in zip(
                reversed(PREFACTOR_CM3), (-2 * error_ev, 0.0, 2 * error_ev), strict=True
            )
        )
        films.append(
            {
                "thickness_nm": thickness,
                "temperature_K": centre,
                "temperature_low_K": low,
                "temperature_high_K": high,
            }
        )
    return {
        "fermi_energy_eV": contour.energy_ev,
        "carriers_per_cm2_per_face": density / ANG2_PER_CM2,
        "activation_gap_eV": width,
        "films": films,
        "reason": "",
        "assumptions": [
            *assumptions,
            f"null: the surface carries up to {HOTTEST_K:g} K and beyond",
        ],
    }


def _below_hottest(value: float) -> float | None:
    return value if value <= HOTTEST_K else None
