"""H(lambda) = (1 - lambda) H_A + lambda H_B, at one lambda and as a function of (k, lambda)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.deformation.comparison import ComparedPair
from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel


@dataclass(frozen=True, slots=True, eq=False)
class Path:
    """The straight line between two Hamiltonians on one list of R.

    Attributes
    ----------
    a, b
        Its ends.
    start
        Fourier sum of H_A.
    change
        Fourier sum of H_B - H_A.
    """

    a: TightBindingModel
    b: TightBindingModel
    start: BlochSum
    change: BlochSum

    @property
    def n_orb(self) -> int:
        return self.start.n_orb

    def model_at(self, lam: float) -> TightBindingModel:
        """H(R) at lambda."""
        h_r = (1 - lam) * self.a.h_r + lam * self.b.h_r
        return TightBindingModel(self.a.r_cells, h_r, self.a.spinful)

    def bloch_at(self, lam: float) -> BlochSum:
        """H(k) at lambda."""
        table = self.start.table + lam * self.change.table
        return BlochSum(self.start.r_half, table, self.n_orb)

    def lower_at(self, point: FloatArray) -> ComplexArray:
        """H(k, lambda) for points (n, d + 1), lambda last; on and below the diagonal at least."""
        k_frac, lam = point[:, :-1], point[:, -1, None, None]
        return np.asarray(self.start.at(k_frac) + lam * self.change.at(k_frac))

    def gradient(self, point: FloatArray) -> ComplexArray:
        """First derivatives, (n, d + 1, n_orb, n_orb): by k, then by lambda."""
        k_frac, lam = point[:, :-1], point[:, -1, None, None, None]
        by_k = self.start.gradient(k_frac) + lam * self.change.gradient(k_frac)
        return np.concatenate([by_k, self.change.at(k_frac)[:, None]], axis=1)

    def hessian(self, point: FloatArray) -> ComplexArray:
        """Second derivatives, pairs in the order of np.triu_indices(d + 1)."""
        k_frac, lam = point[:, :-1], point[:, -1, None, None, None]
        by_k = self.start.hessian(k_frac) + lam * self.change.hessian(k_frac)
        return with_lambda(by_k, self.change.gradient(k_frac))


def build_path(pair: ComparedPair) -> Path:
    """The path between two ends that were found to be comparable."""
    a, b = pair.a.model, pair.b.model
    change = TightBindingModel(a.r_cells, b.h_r - a.h_r, a.spinful)
    return Path(a, b, build_bloch_sum(a), build_bloch_sum(change))


def with_lambda(by_k: ComplexArray, mixed: ComplexArray) -> ComplexArray:
    """Second derivatives by k, and by k and lambda, put together; that by lambda twice is 0.

    Parameters
    ----------
    by_k
        (n, d (d + 1) / 2, n_orb, n_orb).
    mixed
        (n, d, n_orb, n_orb).
    """
    n, d = mixed.shape[:2]
    i, j = np.triu_indices(d + 1)
    together = np.zeros((n, len(i), *mixed.shape[2:]), dtype=np.complex128)
    last = j == d
    together[:, ~last] = by_k
    together[:, last & (i < d)] = mixed
    return together
