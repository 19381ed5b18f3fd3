"""Noise told from a physical perturbation by where the residual of a symmetry sits.

Noise of a file or of an ill-converged run is on all elements of H(R) alike, large or small. A term
that physically breaks a symmetry (a moment, strain, a missing centre) falls off with distance as H
does, and strain is in proportion to it.
"""

from __future__ import annotations

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.diagnosis.results import NoiseTest
from topovet.model.hamiltonian import TightBindingModel, r_index
from topovet.symmetry.inversion import inverted_hopping
from topovet.symmetry.results import InversionOperator
from topovet.symmetry.time_reversal import spin_operator
from topovet.units import MEV_PER_EV

LARGE = 0.1
"""Residual of an element over the root mean square above which it counts as filled."""

LEAST_CONTRAST = 3.0
"""Mean |H_mn(R)| of the strongest quarter of the elements over that of the weakest, below which
residuals cannot be compared with the size of elements."""


def noise_against_time_reversal(model: TightBindingModel) -> NoiseTest:
    """The residual U H(R)* U† - H(R), element by element; spinors interlaced."""
    u = spin_operator(model.n_orb, "interlaced" if model.spinful else "none")
    image = np.asarray(u @ model.h_r.conj() @ u.T)
    return _describe("time reversal", model, image - model.h_r)


def noise_against_inversion(model: TightBindingModel, operator: InversionOperator) -> NoiseTest:
    """The residual (P H P^-1)(R) - H(R), element by element, on the R of H."""
    r_new, image = inverted_hopping(model, operator)
    at = r_index(r_new, model.r_cells)
    residual = -model.h_r
    residual[at >= 0] += image[at[at >= 0]]
    return _describe("inversion", model, residual)


def _describe(of: str, model: TightBindingModel, residual: ComplexArray) -> NoiseTest:
    """Elements that are zero in H were cut off or shared out by shifts, and tell nothing."""
    counted = model.h_r != 0
    size = np.abs(residual[counted])
    rms = _rms(size)
    if rms == 0.0:
        return NoiseTest(of, 0.0, 0.0, None)
    onsite = np.flatnonzero(~model.r_cells.any(axis=1))
    counted[onsite] &= ~np.eye(model.n_orb, dtype=bool)  # the zero of energy is arbitrary
    growth = _growth(np.abs(model.h_r[counted]), np.abs(residual[counted]))
    # two independent draws of sigma stand in each residual
    sigma_mev = MEV_PER_EV * rms / np.sqrt(2)
    return NoiseTest(of, float(sigma_mev), float(np.mean(size > LARGE * rms)), growth)


def _growth(strength: FloatArray, residual: FloatArray) -> float | None:
    """Power of the strength with which residuals grow, from its lowest and highest quarter."""
    quarter = len(strength) // 4
    if not quarter:
        return None
    order = np.argsort(strength, kind="stable")
    weak, strong = order[:quarter], order[-quarter:]
    contrast = float(strength[strong].mean() / strength[weak].mean())
    low, high = _rms(residual[weak]), _rms(residual[strong])
    if contrast < LEAST_CONTRAST or low == 0.0 or high == 0.0:
        return None
    return float(np.log(high / low) / np.log(contrast))


def _rms(values: FloatArray) -> float:
    return float(np.sqrt(np.mean(values**2))) if values.size else 0.0
