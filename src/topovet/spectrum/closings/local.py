"""The bands around a closing: how many touch, how they leave it, and a way back onto it.

Let W be the m states that touch at k0. To first order in q = k - k0 (Cartesian, 1/angstrom) their
energies are the eigenvalues of

    W† H W = E0 + t.q + sum_i q_i A_i,        t_i = tr(W† d_i H W) / m,    tr A_i = 0

(degenerate perturbation theory). G_ij = tr(A_i A_j)/m is a metric of how fast they part: for a
Weyl point A_i = v_ij sigma_j and G = v v^T, for a Dirac point likewise with anticommuting matrices
in place of sigma, so that the square roots of its eigenvalues are the principal velocities. Along a
nodal line G has one zero, the tangent. A cone is tilted over (type II) where
|t.q| > sqrt(q.G.q) for some q, that is where t.G^-1.t > 1.

References
----------
Soluyanov et al., Nature 527, 495 (2015), doi:10.1038/nature15768 (type II).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.model.fourier import BlochSum

SAME_LEVEL_EV = 2e-4
"""Bands within this of the two that touch belong to the node: twice the gap that counts as
closed."""

LINEAR = 0.02
"""A velocity below this part of the largest one counts as none: bands part more slowly there."""


@dataclass(frozen=True, slots=True, eq=False)
class Touching:
    """Bands at one k where the gap closes.

    Attributes
    ----------
    k_frac
        (3,).
    gap_ev
        E[N] - E[N-1] there.
    energy_ev
        Mean energy of the bands that touch.
    n_below, n_above
        How many of them are filled and empty.
    tilt
        (3,) t, eV angstrom, Cartesian.
    slopes
        (3, m, m) A_i, eV angstrom.
    """

    k_frac: FloatArray
    gap_ev: float
    energy_ev: float
    n_below: int
    n_above: int
    tilt: FloatArray
    slopes: ComplexArray

    @property
    def multiplicity(self) -> int:
        return self.n_below + self.n_above

    @property
    def metric(self) -> FloatArray:
        """(3, 3) G, (eV angstrom)^2."""
        return np.asarray(np.einsum("iab,jba->ij", self.slopes, self.slopes).real) / len(
            self.slopes[0]
        )

    @property
    def velocities(self) -> FloatArray:
        """(3,) principal velocities, eV angstrom, ascending."""
        return np.asarray(np.sqrt(np.clip(np.linalg.eigvalsh(self.metric), 0.0, None)))

    def n_linear(self, dimension: int) -> int:
        """Directions along which the bands part linearly."""
        found = self.velocities[3 - dimension :]
        return int(np.sum(found > LINEAR * max(found.max(), 1e-12)))

    def tilt_ratio(self, periodic: tuple[bool, bool, bool]) -> float | None:
        """Largest |t.q| / sqrt(q.G.q), above 1 for type II; None without a cone in all directions.

        Parameters
        ----------
        periodic
            Directions along which k exists.
        """
        d = sum(periodic)
        if self.n_linear(d) < d:
            return None
        values, axes = np.linalg.eigh(self.metric)
        along = (axes.T @ self.tilt)[3 - d :] / np.sqrt(values[3 - d :])
        return float(np.linalg.norm(along))

    @property
    def tangent(self) -> FloatArray:
        """(3,) unit vector along which the bands part most slowly."""
        return np.asarray(np.linalg.eigh(self.metric)[1][:, 0])


def describe_touching(
    bloch: BlochSum, k_frac: FloatArray, filling: int, reciprocal: FloatArray
) -> Touching:
    """The bands that touch at a closing.

    Parameters
    ----------
    bloch
        The Hamiltonian.
    k_frac
        (3,) where the gap closes.
    filling
        N; bands N-1 and N touch.
    reciprocal
        (3, 3) reciprocal vectors as rows, 1/angstrom.
    """
    energies, states = np.linalg.eigh(bloch.at(k_frac[None])[0])
    low, high = energies[filling - 1] - SAME_LEVEL_EV, energies[filling] + SAME_LEVEL_EV
    start = int(np.searchsorted(energies, low))
    stop = int(np.searchsorted(energies, high))
    tilt, slopes = _first_order(bloch, k_frac, states[:, start:stop], reciprocal)
    return Touching(
        k_frac=np.asarray(k_frac, dtype=float),
        gap_ev=float(energies[filling] - energies[filling - 1]),
        energy_ev=float(energies[start:stop].mean()),
        n_below=filling - start,
        n_above=stop - filling,
        tilt=tilt,
        slopes=slopes,
    )


def _first_order(
    bloch: BlochSum, k_frac: FloatArray, states: ComplexArray, reciprocal: FloatArray
) -> tuple[FloatArray, ComplexArray]:
    """t (3,) and A (3, m, m) in Cartesian directions."""
    gradient = bloch.gradient(k_frac[None])[0]
    inside = states.conj().T @ gradient @ states
    cartesian = np.einsum("ia,amn->imn", np.linalg.inv(reciprocal), inside)
    tilt = np.trace(cartesian, axis1=1, axis2=2).real / states.shape[1]
    return tilt, np.asarray(cartesian - tilt[:, None, None] * np.eye(states.shape[1]))


def step_onto(
    bloch: BlochSum,
    k_frac: FloatArray,
    filling: int,
    touching: Touching,
    tangent: FloatArray,
    reciprocal: FloatArray,
    *,
    rounds: int = 8,
    good_ev: float = 1e-9,
) -> tuple[FloatArray, float]:
    """The nearest closing in the plane through k across a tangent, and the gap that is left there.

    Gauss-Newton on the traceless part of the touching bands' Hamiltonian: E - mean + q.A = 0 in
    the sense of least squares, q in the plane.

    Parameters
    ----------
    touching
        A closing near by, for the number of bands that touch.
    tangent
        (3,) unit vector, Cartesian.
    rounds, good_ev
        Most steps, and the gap at which to stop.
    """
    plane = np.linalg.svd(tangent[None])[2][1:]
    bands = slice(filling - touching.n_below, filling + touching.n_above)
    k, best_k, best = np.array(k_frac, dtype=float), np.array(k_frac, dtype=float), np.inf
    for _ in range(rounds):
        energies, states = np.linalg.eigh(bloch.at(k[None])[0])
        gap = float(energies[filling] - energies[filling - 1])
        if gap < best:
            best_k, best = k, gap
        if best < good_ev:
            break
        _, slopes = _first_order(bloch, k, states[:, bands], reciprocal)
        across = np.einsum("pi,imn->pmn", plane, slopes).reshape(2, -1)
        wanted = -np.diag(energies[bands] - energies[bands].mean()).reshape(-1)
        matrix = np.concatenate([across.real.T, across.imag.T])
        solved = np.linalg.lstsq(
            matrix, np.concatenate([wanted, 0 * wanted]).astype(float), rcond=1e-3
        )[0]
        k = k + solved @ plane @ np.linalg.inv(reciprocal)
    return best_k, best
