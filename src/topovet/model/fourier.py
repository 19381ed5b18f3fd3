"""H(k) for many k at once: one real matrix product over half of the R vectors.

Because H(-R) = H(R)†, the pair R, -R contributes

    exp(i phi) H(R) + exp(-i phi) H(R)† = cos(phi) S(R) + sin(phi) D(R),   phi = 2 pi k.R

with S = H + H† and D = i (H - H†), both Hermitian. A Hermitian n x n matrix is n^2 real numbers
(real parts on and below the diagonal, imaginary parts above it), so H(k) for a batch of k is one
real product (n_k, 2 n_half) x (2 n_half, n^2): a quarter of the multiplications of the plain
complex sum over all R.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import sparse

from topovet.arrays import ComplexArray, FloatArray
from topovet.model.hamiltonian import TightBindingModel

CHUNK_BYTES = 64 * 2**20
"""Largest block of H(k) held at a time by the batched routines."""

CACHE_BYTES = 3 * 2**20
"""Size of a block that stays near the processor between its sum and its diagonalisation."""

LEAST_ROWS = 64
"""Fewer k at a time leave the matrix product of the sum waiting for memory."""


@dataclass(frozen=True, slots=True, eq=False)
class BlochSum:
    """The Fourier sum of a Hermitian set H(R), ready for batches of k.

    Attributes
    ----------
    r_half
        (n_half, d) one of each pair R, -R, and R = 0 first; d is 3, or less after `partial`.
    table
        (2 n_half, n_orb^2) packed S(R) rows, then packed D(R) rows.
    n_orb
        Matrix size.
    """

    r_half: FloatArray
    table: FloatArray
    n_orb: int

    def at(self, k_frac: FloatArray) -> ComplexArray:
        """H(k), (n_k, n_orb, n_orb) eV, for k_frac (n_k, d)."""
        phase = 2 * np.pi * (np.asarray(k_frac, dtype=float) @ self.r_half.T)
        weights = np.concatenate([np.cos(phase), np.sin(phase)], axis=1)
        return _unpack(weights @ self.table, self.n_orb)

    def lower_at(self, k_frac: FloatArray) -> ComplexArray:
        """H(k) as `at`, but only on and below the diagonal; above it there is rubbish.

        LAPACK's Hermitian solvers read one triangle (numpy's default is the lower one), and to
        fill the other costs as much as a tenth of the eigenvalues.
        """
        phase = 2 * np.pi * (np.asarray(k_frac, dtype=float) @ self.r_half.T)
        weights = np.empty((len(phase), 2 * phase.shape[1]))
        np.cos(phase, out=weights[:, : phase.shape[1]])
        np.sin(phase, out=weights[:, phase.shape[1] :])
        square = (weights @ self.table).reshape(-1, self.n_orb, self.n_orb)
        h = np.empty(square.shape, dtype=np.complex128)
        h.real = square
        np.negative(square.transpose(0, 2, 1), out=h.imag)
        h.imag[:, np.arange(self.n_orb), np.arange(self.n_orb)] = 0.0
        return h

    def gradient(self, k_frac: FloatArray) -> ComplexArray:
        """dH/dk_i, (n_k, d, n_orb, n_orb) eV per unit of fractional k, for k_frac (n_k, d)."""
        k_frac = np.asarray(k_frac, dtype=float)
        n_k, d = k_frac.shape
        phase = 2 * np.pi * (k_frac @ self.r_half.T)
        slope = 2 * np.pi * self.r_half.T[None, :, :]
        weights = np.concatenate(
            [-np.sin(phase)[:, None, :] * slope, np.cos(phase)[:, None, :] * slope], axis=2
        )
        packed = weights.reshape(n_k * d, -1) @ self.table
        return _unpack(packed, self.n_orb).reshape(n_k, d, self.n_orb, self.n_orb)

    def hessian(self, k_frac: FloatArray) -> ComplexArray:
        """Second derivatives of H, (n_k, d (d + 1) / 2, n_orb, n_orb), for k_frac (n_k, d).

        In eV per unit of fractional k squared; pairs i <= j in the order of np.triu_indices(d).
        """
        k_frac = np.asarray(k_frac, dtype=float)
        n_k, d = k_frac.shape
        i, j = np.triu_indices(d)
        phase = 2 * np.pi * (k_frac @ self.r_half.T)
        curve = -((2 * np.pi) ** 2) * (self.r_half[:, i] * self.r_half[:, j]).T
        weights = np.concatenate(
            [np.cos(phase)[:, None, :] * curve, np.sin(phase)[:, None, :] * curve], axis=2
        )
        packed = weights.reshape(n_k * len(i), -1) @ self.table
        return _unpack(packed, self.n_orb).reshape(n_k, len(i), self.n_orb, self.n_orb)

    def rows(self) -> tuple[ComplexArray, ComplexArray]:
        """S(R) and D(R) as matrices, (n_half, n_orb, n_orb) each."""
        matrices = _unpack(self.table, self.n_orb)
        return matrices[: len(self.r_half)], matrices[len(self.r_half) :]

    def partial(self, axes: tuple[int, ...], k_fixed: FloatArray) -> BlochSum:
        """The sum over the given axes done at k_fixed; what is left depends on the others only.

        Lines and planes of k pay for the fixed components once: a line of a model with 300 R
        needs about ten R per point.

        Parameters
        ----------
        axes
            Components of k that are fixed.
        k_fixed
            (len(axes),) their values, fractional.
        """
        kept = [i for i in range(self.r_half.shape[1]) if i not in axes]
        phase = 2 * np.pi * (self.r_half[:, list(axes)] @ np.asarray(k_fixed, dtype=float))
        r_kept = self.r_half[:, kept]
        # A pair whose kept part is reversed is the same pair seen from -R: cos S + sin D keeps S
        # and turns the sign of D and of the phase.
        sign = _leading_sign(r_kept)
        canonical, group = np.unique(r_kept * sign[:, None], axis=0, return_inverse=True)
        group = group.reshape(-1)
        n_half, n_new = len(r_kept), len(canonical)
        cos, sin = np.cos(phase), np.sin(phase) * sign
        rows = np.arange(n_half)
        # cos(a + b) S + sin(a + b) D, with a the kept and b the fixed part of the phase; each old
        # row feeds two new ones, hence sparse
        mix = sparse.csr_array(
            (
                np.concatenate([cos, sin * sign, -sin, cos * sign]),
                (
                    np.concatenate([group, group, n_new + group, n_new + group]),
                    np.concatenate([rows, n_half + rows, rows, n_half + rows]),
                ),
            ),
            shape=(2 * n_new, 2 * n_half),
        )
        return BlochSum(canonical, mix @ self.table, self.n_orb)


def build_bloch_sum(model: TightBindingModel) -> BlochSum:
    """Packed table of a model; takes half the memory of its h_r."""
    n_orb, n_r = model.n_orb, model.n_r
    middle = n_r // 2  # R = 0 when n_r is odd; the upper half holds one of each pair
    has_origin = n_r % 2 == 1
    half = np.arange(middle, n_r)
    table = np.empty((2 * len(half), n_orb * n_orb))
    for row, r in enumerate(half):
        h = model.h_r[r]
        weight = 0.5 if has_origin and r == middle else 1.0
        table[row] = _pack(weight * (h + h.conj().T))
        table[len(half) + row] = _pack(1j * weight * (h - h.conj().T))
    return BlochSum(model.r_cells[half].astype(float), table, n_orb)


def mapped_sum(
    bloch: BlochSum,
    on_cos: Callable[[ComplexArray], ComplexArray],
    on_sin: Callable[[ComplexArray], ComplexArray],
) -> BlochSum:
    """The sum with a linear map of Hermitian matrices (n_orb, n_orb) applied to every S(R), D(R).

    Parameters
    ----------
    bloch
        The sum; it is left alone.
    on_cos, on_sin
        What S(R) and D(R) turn into.
    """
    n_half = len(bloch.r_half)
    table = np.empty_like(bloch.table)
    for row, packed in enumerate(bloch.table):
        turn = on_cos if row < n_half else on_sin
        table[row] = _pack(turn(_unpack(packed, bloch.n_orb)[0]))
    return BlochSum(bloch.r_half, table, bloch.n_orb)


def added_sum(bloch: BlochSum, other: BlochSum, factor: float) -> BlochSum:
    """H(k) + factor V(k) as one sum, for V on any R vectors."""
    if np.array_equal(bloch.r_half, other.r_half):
        return BlochSum(bloch.r_half, bloch.table + factor * other.table, bloch.n_orb)
    n, m = len(bloch.r_half), len(other.r_half)
    if m == 1 and not other.r_half.any() and not bloch.r_half[0].any():  # V at R = 0 only
        table = bloch.table.copy()
        table[0] += factor * other.table[0]
        return BlochSum(bloch.r_half, table, bloch.n_orb)
    rows = (bloch.table[:n], factor * other.table[:m], bloch.table[n:], factor * other.table[m:])
    return BlochSum(np.concatenate([bloch.r_half, other.r_half]), np.concatenate(rows), bloch.n_orb)


def _pack(hermitian: ComplexArray) -> FloatArray:
    n = len(hermitian)
    lower = np.tri(n, dtype=bool)
    return np.where(lower, hermitian.real, hermitian.imag).reshape(-1)


def _unpack(packed: FloatArray, n: int) -> ComplexArray:
    square = packed.reshape(-1, n, n)
    lower = np.tri(n, dtype=bool)
    transposed = square.transpose(0, 2, 1)
    h = np.empty(square.shape, dtype=np.complex128)
    h.real = np.where(lower, square, transposed)
    h.imag = np.where(lower, -transposed, square)
    h.imag[:, np.arange(n), np.arange(n)] = 0.0
    return h


def _leading_sign(vectors: FloatArray) -> FloatArray:
    """+1 or -1 for each row: the sign of its first non-zero entry, +1 for the zero row."""
    sign = np.ones(len(vectors))
    for column in vectors.T[::-1]:
        sign = np.where(column != 0, np.sign(column), sign)
    return sign


def chunks_of_k(n_k: int, n_orb: int) -> list[slice]:
    """Slices of a list of k whose H(k) stay within `CHUNK_BYTES`."""
    bytes_per_k = 16 * n_orb * n_orb * 3
    step = max(LEAST_ROWS, CACHE_BYTES // bytes_per_k)
    step = max(1, min(step, CHUNK_BYTES // bytes_per_k))
    return [slice(i, min(i + step, n_k)) for i in range(0, n_k, step)]
