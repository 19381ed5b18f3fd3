"""Surface spectral density along a path of the surface zone, both terminations, with spin."""

from __future__ import annotations

import itertools

import numpy as np
from ase.cell import Cell
from ase.dft.kpoints import parse_path_string

from topovet.arrays import ComplexArray, FloatArray
from topovet.boundary.greens import ARRAYS_PER_ENERGY
from topovet.boundary.layers import CHUNK_BYTES, LayerStack, principal_blocks
from topovet.boundary.many_energies import FaceDensity, face_densities
from topovet.boundary.projected import projected_edges
from topovet.boundary.recut import Recut
from topovet.boundary.results import SurfaceMap
from topovet.spectrum.eigen import map_threads

NEGLIGIBLE_SHARE = 0.2
"""Singular values of the coupling of layers are left out up to this share of the broadening: levels
move by at most twice as much, and the ranks that remain are what a map costs."""

SURVEY_POINTS = 160
"""Points along the path at which the bulk is looked at before the map's own points are chosen."""

WINDOW_SCALE_EV = 0.15
"""A window this much wider than the narrowest gets half of its density of points."""

Path = tuple[FloatArray, FloatArray, tuple[int, ...], tuple[str, ...]]


def surface_path(cut: Recut, n_points: int) -> Path:
    """Path over the special points of the surface zone.

    ASE recognises the lattice of a'_1, a'_2 and gives its path, mapped back to them; an edge is
    followed through its whole zone. Names carry no bar here.

    Parameters
    ----------
    cut
        The re-cut cell.
    n_points
        Points in all, spread evenly; every corner is one of them.

    Returns
    -------
    tuple
        k_par (n, 2), distance (n,) in 1/angstrom, and the positions and names of the corners.
    """
    if len(cut.axes) == 1:
        corners = [np.array([-0.5, 0.0]), np.zeros(2), np.array([0.5, 0.0])]
        return _along(corners, ["X", "G", "X"], cut, n_points)
    plane = np.linalg.cholesky(cut.cell[:2] @ cut.cell[:2].T)
    cell = np.zeros((3, 3))
    cell[:2, :2] = plane
    path = Cell(cell).bandpath(pbc=(True, True, False), npoints=0)
    names = parse_path_string(path.path)[0]
    if names[0] == names[-1] == "G":
        # the same loop with a cone at G in the middle, not cut in two
        names = [*names[1:], names[1]]
    return _along([np.asarray(path.special_points[n])[:2] for n in names], names, cut, n_points)


def adapted_path(stack: LayerStack, cut: Recut, filling: int, n_points: int) -> Path:
    """The same path with points closest where the projected bulk bands are.

    There surface levels disperse in a narrow window, and a map with evenly spread points would show
    them as a row of spots.
    """
    k_par, distance, at, labels = surface_path(cut, SURVEY_POINTS)
    window = projected_edges(stack, k_par, filling, zooms=0).gap_ev
    weight = 1 / (window - window.min() + WINDOW_SCALE_EV)
    steps = 0.5 * (weight[1:] + weight[:-1]) * np.diff(distance)
    passed = np.concatenate([[0.0], np.cumsum(steps)])
    wanted = np.interp(np.linspace(0, passed[-1], n_points), passed, distance)
    corners = distance[list(at)]
    # every corner is a point; wanted ones next to it make room
    spacing = np.gradient(wanted)
    near = np.abs(wanted[:, None] - corners) < 0.5 * spacing[:, None]
    chosen = np.sort(np.concatenate([wanted[~near.any(axis=1)], corners]))
    k_chosen = np.stack([np.interp(chosen, distance, k_par[:, i]) for i in (0, 1)], axis=1)
    return k_chosen, chosen, tuple(np.searchsorted(chosen, corners).tolist()), labels


def _along(corners: list[FloatArray], names: list[str], cut: Recut, n_points: int) -> Path:
    steps = [(b - a)[: len(cut.axes)] @ cut.reciprocal for a, b in itertools.pairwise(corners)]
    lengths = np.array([np.linalg.norm(step) for step in steps])
    counts = np.maximum(1, np.round((n_points - 1) * lengths / lengths.sum()).astype(int))
    k_parts, d_parts, at, start = [corners[0][None]], [np.zeros(1)], [0], 0.0
    for (a, b), length, n in zip(itertools.pairwise(corners), lengths, counts, strict=True):
        t = np.arange(1, n + 1) / n
        k_parts.append(a + t[:, None] * (b - a))
        d_parts.append(start + t * length)
        start, at = start + length, [*at, at[-1] + int(n)]
    return np.concatenate(k_parts), np.concatenate(d_parts), tuple(at), tuple(names)


def compute_surface_maps(
    stack: LayerStack,
    cut: Recut,
    path: Path,
    energies_ev: FloatArray,
    broadening_ev: float,
    filling: int,
    terminations: tuple[str, str],
) -> tuple[SurfaceMap, SurfaceMap]:
    """Spectral density on the outermost plane of the upper and of the lower half-crystal.

    Parameters
    ----------
    stack, cut
        The crystal by planes, and their cell.
    path
        From `surface_path`.
    energies_ev
        (n_e,) ascending.
    broadening_ev
        Imaginary part of the energy: every level is a Lorentzian of this half-width.
    filling
        Occupied bands, for the projected edges.
    terminations
        Names of the two.

    Notes
    -----
    Memory: at most `CHUNK_BYTES` per thread beyond the result.
    """
    k_par, distance, at, labels = path
    batch = max(1, CHUNK_BYTES // (16 * stack.layer_size**2 * ARRAYS_PER_ENERGY))
    shifted: ComplexArray = energies_ev + np.complex128(1j * broadening_ev)

    def solve(k: FloatArray) -> tuple[FaceDensity, FaceDensity]:
        inside, across = principal_blocks(stack.planes_at(k[None]))
        parts = [
            face_densities(
                inside[0],
                across[0],
                shifted[i : i + batch],
                stack.n_orb,
                negligible_ev=NEGLIGIBLE_SHARE * broadening_ev,
            )
            for i in range(0, len(shifted), batch)
        ]
        upper, lower = (_joined([part[side] for part in parts]) for side in (0, 1))
        return upper, lower

    solved = map_threads(solve, list(k_par))
    edges = projected_edges(stack, k_par, filling)
    frames = _frames(k_par, cut)
    maps = []
    for side, name in enumerate(terminations):
        # the upper half looks along -n
        outward = -cut.normal_cart if side == 0 else np.asarray(cut.normal_cart)
        faces = [pair[side] for pair in solved]
        spin = None
        if stack.spinful:
            spin = np.stack([_spin(f) for f in faces])
            spin = np.einsum("kei,kji->kej", spin, _with_normal(frames, outward))
        maps.append(
            SurfaceMap(
                miller=cut.miller,
                termination=name,
                k_par=k_par,
                distance=distance,
                label_index=at,
                labels=labels,
                energies_ev=energies_ev,
                density=np.stack([f.same.sum(axis=1) for f in faces]),
                spin=spin,
                broadening_ev=broadening_ev,
                top_ev=edges.top_ev,
                bottom_ev=edges.bottom_ev,
            )
        )
    return maps[0], maps[1]


def _joined(parts: list[FaceDensity]) -> FaceDensity:
    return FaceDensity(
        np.concatenate([p.same for p in parts]), np.concatenate([p.flip for p in parts])
    )


def _spin(face: FaceDensity) -> FloatArray:
    """(n_e, 3) trace of sigma with the density matrix: 2 Re, 2 Im of rho_(down, up), and z."""
    flip = face.flip.sum(axis=1)
    z = (face.same[:, 0::2] - face.same[:, 1::2]).sum(axis=1)
    return np.stack([2 * flip.real, 2 * flip.imag, z], axis=1)


def _frames(k_par: FloatArray, cut: Recut) -> FloatArray:
    """(n_k, 3) unit vectors along the path in the crystal's Cartesian frame."""
    cell = np.asarray(cut.cell)
    reciprocal = np.linalg.inv(cell).T
    ahead = np.gradient(k_par, axis=0)
    if len(cut.axes) == 1:
        along = ahead[:, :1] @ cell[:1]
    else:
        # a reciprocal vector of the re-cut cell less its part along the normal
        along = ahead @ reciprocal[:2]
        along = along - np.outer(along @ cut.normal_cart, cut.normal_cart)
    return np.asarray(along / np.linalg.norm(along, axis=1)[:, None])


def _with_normal(along: FloatArray, outward: FloatArray) -> FloatArray:
    """(n_k, 3, 3): rows outward x along, along, outward."""
    across = np.cross(outward, along)
    return np.stack([across, along, np.broadcast_to(outward, along.shape)], axis=1)
