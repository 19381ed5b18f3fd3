"""H(k) to second order about the centre of a box, with a bound of all that is left out.

About k0, with displacement dk, the unitary diagonal matrix exp(2 pi i dk.tau) takes H(k0 + dk) to

    H~(dk)_mn = sum_R H_mn(R) exp(2 pi i k0.R) exp(2 pi i dk.d),    d = R + tau_n - tau_m,

for *any* positions tau: the spectrum is that of H(k0 + dk). What changes is how fast the matrix
moves: with tau near the true centres the long-range-looking phases inside a cell are gone, which on
a five-atom cell shortens the third derivatives a hundredfold. The positions are therefore fitted to
the Hamiltonian itself, not taken from the input: a wrong one costs boxes, never truth.

Derivatives at dk = 0 follow from those of the periodic gauge, with D = tau_n - tau_m for each m, n:

    H~_a  = d_a H + 2 pi i D_a H,
    H~_ab = d_ab H + 2 pi i (D_a d_b H + D_b d_a H) - 4 pi^2 D_a D_b H      (element by element).

Remainder: |exp(i t) - 1 - i t + t^2/2| <= min(|t|^3/6, t^2). With |dk_a| <= h_a, t is at most
T = 2 pi sum_a h_a |d_a|, so the remainder is element by element at most the matrix
rho = sum_R |H(R)| min(T^3/6, T^2), and |x† X y| <= |x|^T rho |y| gives ||X|| <= ||rho||: the
elements of all R are added before the norm is taken, which is far below the sum of the norms.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.model.fourier import BlochSum
from topovet.model.hamiltonian import TightBindingModel

R_AT_A_TIME = 64
NORM_MARGIN = 1.0 + 1e-9
"""Norms of non-negative matrices are taken this much larger, for the rounding of their sums."""

ROUNDING_FACTOR = 100.0


class SecondOrder(Protocol):
    """What a search over boxes asks of a Hamiltonian in coordinates u: an `Expansion`, or the like.

    `derivatives` and `remainder_ev` refer to one unitary gauge about each u; `rounding_ev` bounds
    the rounding error of every energy and bound.
    """

    @property
    def n_orb(self) -> int: ...

    @property
    def n_axes(self) -> int: ...

    @property
    def rounding_ev(self) -> float: ...

    def derivatives(self, u: FloatArray) -> tuple[ComplexArray, ComplexArray, ComplexArray]: ...

    def remainder_ev(self, half_widths: FloatArray) -> float: ...


@dataclass(frozen=True, slots=True, eq=False)
class Expansion:
    """A Hamiltonian in coordinates u of its own, k = origin + u @ axes, u in [0, 1]^d.

    Attributes
    ----------
    model
        H(R).
    in_u
        The Fourier sum as a function of u.
    offsets
        (d, n_orb, n_orb) D = tau_n - tau_m along each axis (the phase of u_a is 2 pi u_a d_a).
    reach
        (n_r, d) R along each axis.
    rounding_ev
        Bound of all rounding errors of an energy or bound computed here; see `rounding_bound`.
    """

    model: TightBindingModel
    in_u: BlochSum
    offsets: FloatArray
    reach: FloatArray
    rounding_ev: float

    @property
    def n_orb(self) -> int:
        return self.model.n_orb

    @property
    def n_axes(self) -> int:
        return int(self.reach.shape[1])

    def derivatives(self, u: FloatArray) -> tuple[ComplexArray, ComplexArray, ComplexArray]:
        """H (n, n_orb, n_orb), H_a (n, d, ...), H_ab (n, d (d + 1) / 2, ...), a <= b, eV, at u."""
        h, first, second = self.in_u.at(u), self.in_u.gradient(u), self.in_u.hessian(u)
        a, b = np.triu_indices(self.n_axes)
        turn = 2j * np.pi * self.offsets
        second += turn[a] * first[:, b] + turn[b] * first[:, a]
        second += (turn[a] * turn[b]) * h[:, None]
        first += turn * h[:, None]
        return h, first, second

    def remainder_ev(self, half_widths: FloatArray) -> float:
        """Bound of ||H~ - second order|| within a box of these half-widths (d,)."""
        rho = np.zeros(self.offsets.shape[1:])
        for start in range(0, len(self.reach), R_AT_A_TIME):
            part = slice(start, start + R_AT_A_TIME)
            phase = np.zeros((len(self.reach[part]), *rho.shape))
            for axis, width in enumerate(half_widths):
                d = self.reach[part, axis, None, None] + self.offsets[axis]
                phase += 2 * np.pi * width * np.abs(d)
            size = np.abs(self.model.h_r[part])
            rho += (size * np.minimum(phase**3 / 6, phase**2)).sum(axis=0)
        return NORM_MARGIN * float(np.linalg.norm(rho, ord=2))


def expand(
    model: TightBindingModel,
    bloch: BlochSum,
    origin: FloatArray,
    axes: FloatArray,
    *,
    positions: FloatArray | None = None,
) -> Expansion:
    """Set up the coordinates k = origin + u @ axes, fractional, for axes (d, 3).

    `positions` (n_orb, 3) are those of the gauge, any will do; by default those that fit.
    """
    phase = 2 * np.pi * (bloch.r_half @ origin)
    cos, sin = np.cos(phase)[:, None], np.sin(phase)[:, None]
    s, d = np.split(bloch.table, 2)
    # cos(x + p) S + sin(x + p) D, sorted by cos x and sin x
    table = np.concatenate([cos * s + sin * d, cos * d - sin * s])
    along = (fit_positions(model) if positions is None else positions) @ axes.T
    offsets = (along[None, :, :] - along[:, None, :]).transpose(2, 0, 1)
    return Expansion(
        model=model,
        in_u=BlochSum(bloch.r_half @ axes.T, table, bloch.n_orb),
        offsets=np.ascontiguousarray(offsets),
        reach=model.r_cells @ axes.T,
        rounding_ev=rounding_bound(model),
    )


def fit_positions(model: TightBindingModel) -> FloatArray:
    """(n_orb, 3) fractional tau that make sum_R |H_mn(R)|^2 (R + tau_n - tau_m)^2 least.

    A linear problem for each component, one Laplacian for all. Orbitals that nothing connects keep
    any distance, as they may.
    """
    weight = np.abs(model.h_r) ** 2
    pulls = np.einsum("rmn,ra->amn", weight, model.r_cells.astype(float))
    total = weight.sum(axis=0)
    laplacian = np.diag(total.sum(axis=0) + total.sum(axis=1)) - total - total.T
    right = pulls.sum(axis=2) - pulls.sum(axis=1)
    return np.asarray(np.linalg.lstsq(laplacian, right.T, rcond=1e-9)[0])


def rounding_bound(model: TightBindingModel) -> float:
    """Bound of the rounding error of every eigenvalue and bound computed from a model, eV.

    With eps the spacing of floating-point numbers at 1 and S = ||sum_R |H(R)| (1 + 2 pi |R|_1)||,
    which bounds H, the errors of its phases for |k_i| <= 2 up to a few eps, and its derivatives
    times the half-width of a box:

    - a sum of n terms in any order is off by at most n eps times the sum of their sizes (Higham,
      Accuracy and Stability of Numerical Algorithms, 2nd ed. 2002, section 3.1): n_r terms;
    - an eigenvalue from LAPACK is off by p(n) eps ||H||, p a modestly growing function of the
      dimension (LAPACK Users' Guide, 3rd ed. 1999, section 4.7); eigenvectors are orthonormal to
      p(n) eps, and each product of n x n matrices adds n eps. p(n) = 10 n is used.

    The factor of 100 leaves room for the dozen such steps between H(R) and a bound; the result is
    some 1e-9 eV for 30 orbitals.
    """
    size = np.zeros((model.n_orb, model.n_orb))
    for r_cell, h in zip(model.r_cells, model.h_r, strict=True):
        size += np.abs(h) * (1 + 2 * np.pi * np.abs(r_cell).sum())
    steps = model.n_r + 10 * model.n_orb
    scale = float(np.linalg.norm(size, ord=2))
    return ROUNDING_FACTOR * steps * float(np.finfo(float).eps) * scale
