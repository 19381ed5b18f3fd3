"""A crystal as a stack of principal layers: H(k_par) within a layer and to the next.

A principal layer holds as many lattice planes as H(R) reaches across, so that only neighbouring
ones are coupled. With H_j(k) = sum over the in-plane R of exp(2 pi i k.R) H(R, j), the block from
plane a to plane b is H_{b - a}.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray, frozen
from topovet.model.hamiltonian import TightBindingModel

CHUNK_BYTES = 64 * 2**20
"""Working memory of one batch of k_par (and energies) that the routines of this package allow."""


@dataclass(frozen=True, slots=True, eq=False)
class LayerStack:
    """H(R) of a re-cut cell, sorted by the plane it leads to.

    Attributes
    ----------
    r_par
        For each j = 0 ... reach: (n_j, 2) in-plane lattice vectors.
    h_par
        For each j: (n_j, n_orb, n_orb) eV, <m 0|H|n R> with R on plane j.
    dropped_mev
        Norm of what was cut off beyond the reach: no eigenvalue of any half-crystal or slab moves
        by more than this.
    spinful
        Orbitals 2i and 2i + 1 are spin up and down along z of the crystal's frame.
    sites_par
        (n_orb, 2) in-plane positions, fractional. With them H_mn(k) carries the phase
        exp(2 pi i k.(tau_n - tau_m)): levels are the same, but H changes as little as it can from
        one k_par to the next, no longer with phases of distant cells. None leaves them out.
    """

    r_par: tuple[IntArray, ...]
    h_par: tuple[ComplexArray, ...]
    dropped_mev: float
    spinful: bool
    sites_par: FloatArray | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "r_par", tuple(frozen(r) for r in self.r_par))
        object.__setattr__(self, "h_par", tuple(frozen(h) for h in self.h_par))

    @property
    def n_orb(self) -> int:
        return int(self.h_par[0].shape[1])

    @property
    def reach(self) -> int:
        """Planes in a principal layer."""
        return max(1, len(self.r_par) - 1)

    @property
    def layer_size(self) -> int:
        """Orbitals in a principal layer."""
        return self.reach * self.n_orb

    def planes_at(self, k_par: FloatArray) -> ComplexArray:
        """H_j(k_par), (reach + 1, n_k, n_orb, n_orb) eV, for k_par (n_k, 2) fractional."""
        k_par = np.asarray(k_par, dtype=float)
        n = self.n_orb
        planes = np.zeros((self.reach + 1, len(k_par), n, n), dtype=np.complex128)
        for j, (r, h) in enumerate(zip(self.r_par, self.h_par, strict=True)):
            phases = np.exp(2j * np.pi * (k_par @ r.T))
            planes[j] = (phases @ h.reshape(len(h), n * n)).reshape(-1, n, n)
        if self.sites_par is not None:
            turn = np.exp(2j * np.pi * (k_par @ self.sites_par.T))
            planes *= turn.conj()[:, :, None] * turn[:, None, :]
        return planes

    def bulk_at(self, planes: ComplexArray, k_normal: FloatArray) -> ComplexArray:
        """Bulk H, (n_k, n_normal, n_orb, n_orb), from `planes_at` and k along the normal."""
        steps = np.arange(1, len(planes))
        phases = np.exp(2j * np.pi * np.outer(k_normal, steps))
        upward = np.einsum("pj,jkmn->kpmn", phases, planes[1:], optimize=True)
        h: ComplexArray = planes[0][:, None] + upward + upward.conj().transpose(0, 1, 3, 2)
        return h


def build_layers(
    recut_model: TightBindingModel,
    *,
    most_dropped_mev: float = 0.0,
    sites_par: FloatArray | None = None,
) -> LayerStack:
    """Sort a re-cut model by planes.

    Parameters
    ----------
    recut_model
        From `recut_model`: the third component of R counts planes.
    most_dropped_mev
        Outermost planes are cut off as long as the sum of norms cut off, an upper bound of the
        change of any half-crystal, slab or bulk Hamiltonian, stays below this.
    sites_par
        See `LayerStack`.
    """
    r, h = np.asarray(recut_model.r_cells), np.asarray(recut_model.h_r)
    reach = int(np.abs(r[:, 2]).max())
    dropped = 0.0
    while reach > 1:
        # both directions: ||sum_j (T_j S^j + h.c.)|| <= 2 sum_R ||H(R)|| over R with R_3 = j > 0
        outer = 2e3 * float(np.linalg.norm(h[r[:, 2] == reach], ord=2, axis=(1, 2)).sum())
        if dropped + outer > most_dropped_mev:
            break
        dropped, reach = dropped + outer, reach - 1
    on_plane = [r[:, 2] == j for j in range(reach + 1)]
    return LayerStack(
        tuple(r[mask][:, :2].copy() for mask in on_plane),
        tuple(h[mask].copy() for mask in on_plane),
        dropped,
        recut_model.spinful,
        None if sites_par is None else frozen(np.ascontiguousarray(sites_par)),
    )


def principal_blocks(planes: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    """H and T of principal layers from H_j, (reach + 1, n_k, n, n)."""
    n_k, n = planes.shape[1:3]
    p = len(planes) - 1
    inside = np.zeros((n_k, p, n, p, n), dtype=np.complex128)
    across = np.zeros_like(inside)
    down = planes.conj().transpose(0, 1, 3, 2)
    for a in range(p):
        for b in range(p):
            inside[:, a, :, b] = planes[b - a] if b >= a else down[a - b]
            if b <= a:
                across[:, a, :, b] = planes[p + b - a]
    return inside.reshape(n_k, p * n, p * n), across.reshape(n_k, p * n, p * n)
