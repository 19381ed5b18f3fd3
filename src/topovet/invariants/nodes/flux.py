"""Berry flux through a small closed surface, and Berry phase around a small loop.

With A = i <u|du> of the filled bands, the flux through a surface is 2 pi times an integer, the
chirality of what it encloses. On a net of quadrilaterals each face contributes
-arg det(M_ab M_bc M_cd M_da), M the overlap of neighbouring occupied spaces, counter-clockwise as
seen from outside; the sum over a closed net is 2 pi times an integer whatever its size, and the
right one if no face holds more than pi (Fukui, Hatsugai, Suzuki, J. Phys. Soc. Jpn. 74, 1674
(2005), doi:10.1143/JPSJ.74.1674). For H = chi v q.sigma the flux of the filled band is +2 pi chi.

The net is a cube projected on an ellipsoid that follows the velocities of the node, so that slow
and fast directions are resolved alike.
"""

from __future__ import annotations

import functools
import itertools
from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import eigenstates, eigenvalues

MESHES = (6, 10, 16, 24)
"""Faces along an edge of the cube; two in a row must agree."""

LARGEST_FLUX = 1.2
"""Flux through one face, radians, up to which a count is believed: well below pi."""

LEAST_OVERLAP = 0.2
"""Least |det M| of neighbours on the net."""

PROBE_MESH = 4
RADII = 8
"""Radii that are tried, each half of the one before: the one with the widest gap is taken."""

LOOP_POINTS = (24, 48)
PHASE_TOLERANCE = 0.02
"""Largest distance of a Berry phase from 0 or pi, in units of pi, and from the coarser loop's."""


@dataclass(frozen=True, slots=True)
class SurfaceFlux:
    """Berry flux out of a closed surface.

    Attributes
    ----------
    charge
        Flux over 2 pi; None where nets disagree or a face holds too much.
    radius
        Longest half-axis, 1/angstrom.
    gap_ev
        Smallest gap on the net.
    largest_flux
        Largest flux through one face, radians.
    n_solves
        Eigenvalue problems.
    """

    charge: int | None
    radius: float
    gap_ev: float
    largest_flux: float
    n_solves: int


def node_flux(
    bloch: BlochSum,
    centre_frac: FloatArray,
    filling: int,
    reciprocal: FloatArray,
    shape: FloatArray,
    largest_radius: float,
) -> SurfaceFlux:
    """Chirality of what a surface around a node encloses.

    Parameters
    ----------
    bloch, filling
        The Hamiltonian and its filled bands.
    centre_frac
        (3,) the node.
    reciprocal
        (3, 3) reciprocal vectors as rows, 1/angstrom.
    shape
        (3, 3) symmetric, largest eigenvalue 1: the surface is centre + radius * n @ shape.
    largest_radius
        Largest half-axis, 1/angstrom; smaller ones are tried too.
    """
    probe = _sphere(PROBE_MESH).points @ shape
    radii = largest_radius * 0.5 ** np.arange(RADII)
    k_frac = centre_frac + (radii[:, None, None] * probe) @ np.linalg.inv(reciprocal)
    energies = eigenvalues(bloch, k_frac.reshape(-1, 3)).reshape(*k_frac.shape[:2], -1)
    gaps = (energies[:, :, filling] - energies[:, :, filling - 1]).min(axis=1)
    radius = float(radii[int(gaps.argmax())])
    n_solves, before = k_frac.shape[0] * k_frac.shape[1], None
    least_gap, largest = float(gaps.max()), np.inf
    for n in MESHES:
        net = _sphere(n)
        k_frac = centre_frac + radius * net.points @ shape @ np.linalg.inv(reciprocal)
        gap, flux, overlap = _net_flux(bloch, k_frac, filling, net.faces)
        n_solves += len(k_frac)
        least_gap, largest = min(least_gap, gap), float(np.abs(flux).max())
        sound = largest < LARGEST_FLUX and overlap > LEAST_OVERLAP
        charge = round(float(flux.sum()) / (2 * np.pi)) if sound else None
        if charge is not None and charge == before:
            return SurfaceFlux(charge, radius, least_gap, largest, n_solves)
        before = charge
    return SurfaceFlux(None, radius, least_gap, largest, n_solves)


def surface_shape(metric: FloatArray, flattest: float = 6.0) -> FloatArray:
    """(3, 3) shape on which a cone of that metric has the same gap everywhere.

    Parameters
    ----------
    metric
        (3, 3) G of `topovet.spectrum.closings.local`.
    flattest
        Largest ratio of half-axes.
    """
    values, axes = np.linalg.eigh(metric)
    speed = np.sqrt(np.clip(values, values[-1] / flattest**2, None))
    return np.asarray((axes * (speed[0] / speed)) @ axes.T)


def loop_berry_phase(
    bloch: BlochSum,
    centre_frac: FloatArray,
    normal: FloatArray,
    radius: float,
    filling: int,
    reciprocal: FloatArray,
) -> tuple[float | None, float]:
    """Berry phase of the filled bands around a circle, and the smallest gap on it.

    Parameters
    ----------
    normal
        (3,) unit vector, Cartesian, about which the circle turns counter-clockwise.
    radius
        1/angstrom.

    Returns
    -------
    phase
        In units of pi, in (-1, 1]; None where two numbers of points disagree.
    gap_ev
        eV.
    """
    first, second = np.linalg.svd(normal[None])[2][1:]
    if np.cross(first, second) @ normal < 0:
        second = -second
    phases, least = [], np.inf
    for n in LOOP_POINTS:
        angle = 2 * np.pi * np.arange(n) / n
        circle = np.cos(angle)[:, None] * first + np.sin(angle)[:, None] * second
        k_frac = centre_frac + radius * circle @ np.linalg.inv(reciprocal)
        energies, states = eigenstates(bloch, k_frac)
        least = min(least, float((energies[:, filling] - energies[:, filling - 1]).min()))
        links = _links(states[:, :, :filling], np.arange(n), np.roll(np.arange(n), -1))
        if np.abs(links).min() < LEAST_OVERLAP:
            return None, least
        phases.append(-float(np.angle(links).sum()) / np.pi)
    apart = (phases[1] - phases[0] + 1) % 2 - 1
    if abs(apart) > PHASE_TOLERANCE:
        return None, least
    return float(1 - (1 - phases[1]) % 2), least


def nearest_quantised(phase: float | None) -> int | None:
    """0 or 1 (pi) if the phase, in units of pi, is that to within `PHASE_TOLERANCE`."""
    if phase is None:
        return None
    away = abs(phase)
    if away < PHASE_TOLERANCE:
        return 0
    return 1 if 1 - away < PHASE_TOLERANCE else None


@dataclass(frozen=True, slots=True, eq=False)
class _Net:
    """points (n, 3) on the unit sphere; faces (m, 4), counter-clockwise from outside."""

    points: FloatArray
    faces: IntArray


@functools.cache
def _sphere(n: int) -> _Net:
    """A cube of n x n faces on each side, projected: angles are equal along the middle lines."""
    corners = [p for p in itertools.product(range(n + 1), repeat=3) if {0, n} & set(p)]
    number = {p: i for i, p in enumerate(corners)}
    faces = []
    for axis, side in itertools.product(range(3), (0, n)):
        u, v = (axis + 1) % 3, (axis + 2) % 3
        for i, j in itertools.product(range(n), repeat=2):
            around = [(i, j), (i + 1, j), (i + 1, j + 1), (i, j + 1)]
            face = []
            for a, b in around if side else reversed(around):
                corner = [0, 0, 0]
                corner[axis], corner[u], corner[v] = side, a, b
                face.append(number[corner[0], corner[1], corner[2]])
            faces.append(face)
    on_cube = np.tan(np.pi / 4 * (2 * np.array(corners) / n - 1))
    return _Net(on_cube / np.linalg.norm(on_cube, axis=1)[:, None], np.array(faces))


def _net_flux(
    bloch: BlochSum, k_frac: FloatArray, filling: int, faces: IntArray
) -> tuple[float, FloatArray, float]:
    """Smallest gap, flux through each face (radians), smallest |det M|."""
    energies, states = eigenstates(bloch, k_frac)
    gap = float((energies[:, filling] - energies[:, filling - 1]).min())
    occupied = states[:, :, :filling]
    links = np.array([_links(occupied, faces[:, i], faces[:, (i + 1) % 4]) for i in range(4)])
    return gap, -np.angle(links.prod(axis=0)), float(np.abs(links).min())


def _links(occupied: ComplexArray, at: IntArray, to: IntArray) -> ComplexArray:
    """(n,) det of the overlaps between states (n_k, n_orb, n_occ) at pairs of k."""
    overlaps = occupied[at].conj().transpose(0, 2, 1) @ occupied[to]
    return np.asarray(np.linalg.det(overlaps))
