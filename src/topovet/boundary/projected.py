"""The bulk seen along the surface normal: band edges at fixed k_par, and how fast H changes."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray
from topovet.boundary.layers import CHUNK_BYTES, LayerStack
from topovet.spectrum.eigen import map_threads

LEAST_NORMAL_POINTS = 12
"""Points along the normal on which the edges are sampled first, at least."""

ZOOMS = 2
"""Times that the neighbourhood of an extremum is sampled again, each time eight times finer."""


@dataclass(frozen=True, slots=True, eq=False)
class ProjectedEdges:
    """Edges of the bulk bands projected on k_par.

    Attributes
    ----------
    top_ev, bottom_ev
        (n_k,) largest E[N-1] and smallest E[N] over k along the normal.
    n_solves
        Eigenvalue problems solved.
    """

    top_ev: FloatArray
    bottom_ev: FloatArray
    n_solves: int

    @property
    def gap_ev(self) -> FloatArray:
        """(n_k,) width of the window; not positive where the projections overlap."""
        return self.bottom_ev - self.top_ev


def projected_edges(
    stack: LayerStack, k_par: FloatArray, filling: int, *, zooms: int = ZOOMS
) -> ProjectedEdges:
    """Band edges at each k_par, sampled along the normal and refined around the extrema.

    Attained values: the true window can only be narrower.

    Parameters
    ----------
    stack
        The crystal by planes.
    k_par
        (n_k, 2) fractional.
    filling
        Occupied bands per cell.
    zooms
        Times that the extrema are looked at again.
    """
    n_normal = max(LEAST_NORMAL_POINTS, 4 * stack.reach)
    step = max(1, CHUNK_BYTES // (3 * 16 * stack.n_orb**2 * n_normal))
    parts = [k_par[i : i + step] for i in range(0, len(k_par), step)]
    found = map_threads(lambda part: _edges(stack, part, filling, n_normal, zooms), parts)
    solves = len(k_par) * (n_normal + 2 * zooms * 9)
    top, bottom = (np.concatenate([f[i] for f in found]) for i in (0, 1))
    return ProjectedEdges(top, bottom, solves)


def _edges(
    stack: LayerStack, k_par: FloatArray, filling: int, n_normal: int, zooms: int
) -> tuple[FloatArray, FloatArray]:
    planes = stack.planes_at(k_par)
    grid = np.broadcast_to(np.arange(n_normal) / n_normal, (len(k_par), n_normal))
    sampled = _energies(planes, grid)
    edges = []
    for band, sign in ((filling - 1, -1.0), (filling, 1.0)):
        # the lowest point of sign * E, looked at again and again around where it was found
        values, at, width = sign * sampled[:, :, band], grid, 1.0 / n_normal
        best = values.min(axis=1)
        for _ in range(zooms):
            centre = np.take_along_axis(at, values.argmin(axis=1)[:, None], axis=1)
            at = centre + width * np.linspace(-1, 1, 9)
            values, width = sign * _energies(planes, at)[:, :, band], width / 4
            best = np.minimum(best, values.min(axis=1))
        edges.append(sign * best)
    return edges[0], edges[1]


def _energies(planes: ComplexArray, k_normal: FloatArray) -> FloatArray:
    """(n_k, n_normal, n_orb) energies for k_normal (n_k, n_normal)."""
    steps = np.arange(1, len(planes))
    phases = np.exp(2j * np.pi * k_normal[:, :, None] * steps)
    h = np.einsum("kpj,jkmn->kpmn", phases, planes[1:], optimize=True)
    # eigvalsh reads the lower triangle: of the Hermitian sum it needs both halves
    h = h + h.conj().transpose(0, 1, 3, 2) + planes[0][:, None]
    return np.linalg.eigvalsh(h)


def largest_step(stack: LayerStack, planes_a: ComplexArray, planes_b: ComplexArray) -> FloatArray:
    """(n,) bounds in eV on how far any level of the half-crystal moves from k_a to k_b.

    By Weyl's inequality the norm of the change of H; a half-crystal is a compression of the
    infinite one, whose norm is the largest over k along the normal, sampled here.
    """
    n_normal = max(LEAST_NORMAL_POINTS // 2, 2 * stack.reach)
    grid = np.arange(n_normal) / n_normal
    change = stack.bulk_at(planes_b - planes_a, grid)
    norms = np.abs(np.linalg.eigvalsh(change)).max(axis=(1, 2))
    return np.asarray(norms)
