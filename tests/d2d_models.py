"""A strong topological insulator without inversion, whose S4 knows the strong index."""

from __future__ import annotations

import numpy as np

from lattice_models import HARMONICS, SIGMA, LatticeModel, Terms, wilson_dirac

D2D_ROTATIONS = [
    np.eye(3, dtype=np.int64),
    np.array([[0, 1, 0], [-1, 0, 0], [0, 0, -1]]),  # S4
    np.array([[-1, 0, 0], [0, -1, 0], [0, 0, 1]]),
    np.array([[0, -1, 0], [1, 0, 0], [0, 0, -1]]),
    np.array([[0, 1, 0], [1, 0, 0], [0, 0, 1]]),  # diagonal mirrors
    np.array([[0, -1, 0], [-1, 0, 0], [0, 0, 1]]),
    np.array([[1, 0, 0], [0, -1, 0], [0, 0, -1]]),  # twofold axes x and y
    np.array([[-1, 0, 0], [0, 1, 0], [0, 0, -1]]),
]


def wilson_dirac_without_inversion(m: float, d_wave: float) -> LatticeModel:
    """Wilson-Dirac with s-p hopping d_wave (cos kx - cos ky), which leaves D2d and time reversal.

    On s and the p state of j = 1/2, sum_i p_i sigma_i |spin>/sqrt(3), the term is i times a spin
    scalar: even in k and odd under inversion. The spectrum is ±sqrt(m(k)² + (|d(k)| ± g(k))²), so
    it closes no gap where m(k) is not zero, and a small one none at all that was open.
    """
    model = wilson_dirac(m=m)
    terms = Terms(8)
    s, p = slice(0, 2), slice(2, 8)
    axes = [{"px": 0, "py": 1, "pz": 2}[name] for name in HARMONICS[1:]]
    block = 1j * d_wave / (2 * np.sqrt(3)) * np.concatenate([SIGMA[i] for i in axes], axis=1)
    for r_cell, sign in (((1, 0, 0), 1), ((-1, 0, 0), 1), ((0, 1, 0), -1), ((0, -1, 0), -1)):
        terms.add(r_cell, s, p, sign * block)
    cells, blocks = terms.arrays()
    return LatticeModel(
        "wilson_dirac_d2d",
        model.crystal,
        model.basis,
        np.concatenate([model.r_cells, cells]),
        np.concatenate([model.h_r, blocks]),
        2,
        True,
        model.centre,
    )
