"""Real spherical harmonics s to f, and the matrices that turn them.

Order of the 16 functions, Wannier90's: s | pz px py | dz2 dxz dyz dx2-y2 dxy | fz3 fxz2 fyz2
fz(x2-y2) fxyz fx(x2-3y2) fy(3x2-y2). They are the real combinations of the spherical harmonics,
positive where their name is (px > 0 for x > 0), without a Condon-Shortley sign:

    Y_l^m real = sqrt(2) (-1)^m Re Y_lm (cosine kind),   sqrt(2) (-1)^m Im Y_lm (sine kind),  m > 0.

References
----------
Varshalovich, Moskalev, Khersonskii, Quantum Theory of Angular Momentum (World Scientific, 1988),
chapter 5, for Y_lm; Helgaker, Jorgensen, Olsen, Molecular Electronic-Structure Theory (Wiley,
2000), section 6.4, for the real combinations. The order is that of the Wannier90 user guide, from
memory.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from topovet.arrays import FloatArray, frozen

N_HARMONICS = 16

HARMONIC_L = frozen(np.repeat(np.arange(4), [1, 3, 5, 7]))
"""(16,) l of each harmonic."""

MAX_NON_ORTHOGONALITY = 1e-3
"""Largest |R^T R - 1| of a rotation: cells are written with few digits, not with wrong angles."""

_SAME_L = HARMONIC_L[:, None] == HARMONIC_L[None, :]


def compute_harmonics(directions: FloatArray) -> FloatArray:
    """Values of the 16 real harmonics.

    Parameters
    ----------
    directions
        (n, 3) unit vectors, Cartesian.

    Returns
    -------
    FloatArray
        (n, 16); orthonormal under the integral over the unit sphere.
    """
    x, y, z = np.asarray(directions, dtype=float).T
    root = np.sqrt
    functions = [
        root(1 / 4) * np.ones_like(x),
        root(3 / 4) * z,
        root(3 / 4) * x,
        root(3 / 4) * y,
        root(5 / 16) * (3 * z**2 - 1),
        root(15 / 4) * x * z,
        root(15 / 4) * y * z,
        root(15 / 16) * (x**2 - y**2),
        root(15 / 4) * x * y,
        root(7 / 16) * (5 * z**3 - 3 * z),
        root(21 / 32) * x * (5 * z**2 - 1),
        root(21 / 32) * y * (5 * z**2 - 1),
        root(105 / 16) * z * (x**2 - y**2),
        root(105 / 4) * x * y * z,
        root(35 / 32) * x * (x**2 - 3 * y**2),
        root(35 / 32) * y * (3 * x**2 - y**2),
    ]
    return np.asarray(np.stack(functions, axis=1) / root(np.pi))


def harmonic_rotation(rotation: FloatArray) -> FloatArray:
    """Matrix D of a rotation, proper or not, on the 16 harmonics.

    A function turned by R is (R f)(r) = f(R^-1 r), and R Y_m = sum_m' D[m', m] Y_m', so that
    D(R1 R2) = D(R1) D(R2) and D of inversion is (-1)^l. D is the integral of Y_m'(r) Y_m(R^-1 r)
    over the sphere, by a quadrature that is exact for it.

    Parameters
    ----------
    rotation
        (3, 3) orthogonal matrix on Cartesian column vectors. One that is orthogonal only to the
        digits of a cell is replaced by the nearest orthogonal matrix, so that D is orthogonal.

    Returns
    -------
    FloatArray
        (16, 16) orthogonal, block diagonal in l.

    Raises
    ------
    ValueError
        R^T R differs from 1 by more than `MAX_NON_ORTHOGONALITY`.
    """
    return _harmonic_rotation(np.ascontiguousarray(rotation, dtype=float).tobytes())


@lru_cache(maxsize=1024)  # every task that needs the group builds it
def _harmonic_rotation(rotation: bytes) -> FloatArray:
    given = np.frombuffer(rotation).reshape(3, 3)
    defect = float(np.abs(given.T @ given - np.eye(3)).max())
    if not defect <= MAX_NON_ORTHOGONALITY:
        raise ValueError(f"not a rotation: R^T R differs from 1 by {defect:.2g}")
    left, _, right = np.linalg.svd(given)
    directions, weights = sphere_quadrature()
    # R^-1 r = R^T r for a column r, hence r R for the rows of `directions`
    turned = compute_harmonics(directions @ (left @ right))
    d = (compute_harmonics(directions) * weights[:, None]).T @ turned
    return frozen(np.where(_SAME_L, d, 0.0))


@lru_cache(maxsize=1)
def sphere_quadrature() -> tuple[FloatArray, FloatArray]:
    """Directions (32, 3) and weights (32,) that integrate polynomials of degree 6 exactly.

    Four Gauss-Legendre nodes in cos theta (degree 7) times eight equal steps in phi (degree 7).
    """
    cosines, weights = np.polynomial.legendre.leggauss(4)
    phi = 2 * np.pi * np.arange(8) / 8
    sines = np.sqrt(1 - cosines**2)[:, None]
    grid = np.stack(
        [
            sines * np.cos(phi),
            sines * np.sin(phi),
            np.broadcast_to(cosines[:, None], (4, 8)),
        ],
        axis=-1,
    )
    return frozen(grid.reshape(-1, 3)), frozen(np.repeat(weights * 2 * np.pi / 8, 8))
