"""Centres on a wrong branch: found by their distance from the declared sites.

A centre is a Berry phase, summed over the mesh and known modulo the branches of its logarithms.
Branches taken alike at every k move it by a supercell vector, which changes nothing. Branches
taken differently move it anywhere, and every Wigner-Seitz shift of that function is then wrong,
while H(R) itself is sound.
"""

from __future__ import annotations

import numpy as np
from ase.geometry import find_mic, minkowski_reduce

from topovet.arrays import BoolArray, FloatArray

SAME_SITE_ANG = 1e-3
"""Declared positions closer than this are one site."""

ON_A_SITE_ANG = 0.3
"""A centre this close to a site sits on it; sound centres here are within 0.22 angstrom."""

HALFWAY_MARGIN = 1.05
"""A bond centre lies exactly half-way between two sites; it is not suspicious."""


def centre_offsets(
    centres_cart: FloatArray,
    sites_frac: FloatArray,
    cell: FloatArray,
    mp_grid: tuple[int, int, int],
) -> FloatArray:
    """Distance of each centre from its declared site, modulo the supercell.

    Not modulo the cell: the home cell of a Wannier function is part of what its centre says.

    Parameters
    ----------
    centres_cart
        (n_wann, 3) angstrom, as printed.
    sites_frac
        (n_wann, 3) declared site of each Wannier function, fractional, not wrapped.
    cell
        (3, 3) angstrom, rows.
    mp_grid
        Supercell in units of the cell.

    Returns
    -------
    FloatArray
        (n_wann,) angstrom, minimal image.
    """
    supercell = np.asarray(cell, dtype=float) * np.asarray(mp_grid)[:, None]
    separation = np.asarray(centres_cart, dtype=float) - np.asarray(sites_frac) @ cell
    return np.asarray(find_mic(separation, supercell)[1], dtype=float)


def site_spacings(sites_frac: FloatArray, cell: FloatArray) -> FloatArray:
    """Distance from each declared site to the nearest other site or image of a site.

    Parameters
    ----------
    sites_frac
        (n_wann, 3) fractional.
    cell
        (3, 3) angstrom, rows.

    Returns
    -------
    FloatArray
        (n_wann,) angstrom; at most the shortest lattice vector.
    """
    sites = np.asarray(sites_frac, dtype=float).reshape(-1, 3)
    n = len(sites)
    shortest = float(np.linalg.norm(minkowski_reduce(cell)[0], axis=1).min())
    if n == 0:
        return np.empty(0)
    separation = (sites[None, :, :] - sites[:, None, :]).reshape(-1, 3) @ cell
    distances = np.asarray(find_mic(separation, cell)[1], dtype=float).reshape(n, n)
    distances[distances < SAME_SITE_ANG] = shortest
    return np.asarray(np.minimum(distances.min(axis=1), shortest))


def suspicious_centres(
    offsets_ang: FloatArray, sites_frac: FloatArray, cell: FloatArray
) -> BoolArray:
    """Which centres are more than half-way to another site.

    A Wannier function may well sit beside its site, up to the middle of a bond. One that has gone
    further than half the distance to the nearest other site belongs elsewhere: it is on a wrong
    branch, or localised on another atom, or was printed in another home cell. Which of them is
    decided by what the Hamiltonian says with its centre and with its site (symmetry residual,
    bands), not here.

    Parameters
    ----------
    offsets_ang
        (n_wann,) from `centre_offsets`.
    sites_frac, cell
        As there.

    Returns
    -------
    BoolArray
        (n_wann,).
    """
    limit = 0.5 * HALFWAY_MARGIN * site_spacings(sites_frac, cell)
    return np.asarray(np.asarray(offsets_ang) > limit)


def centres_on_other_sites(
    centres_cart: FloatArray,
    sites_frac: FloatArray,
    cell: FloatArray,
    mp_grid: tuple[int, int, int],
    suspects: BoolArray,
) -> BoolArray:
    """Which suspects sit on a site that is declared for other functions.

    A wrong branch leaves a centre anywhere; a wrong order of the projections leaves it on an atom,
    only not on the declared one.

    Parameters
    ----------
    centres_cart, sites_frac, cell, mp_grid
        As in `centre_offsets`.
    suspects
        (n_wann,) from `suspicious_centres`.

    Returns
    -------
    BoolArray
        (n_wann,).
    """
    supercell = np.asarray(cell, dtype=float) * np.asarray(mp_grid)[:, None]
    sites = np.unique(np.round(np.asarray(sites_frac, dtype=float), 6), axis=0) @ cell
    there = np.zeros(len(centres_cart), dtype=bool)
    for i in np.flatnonzero(suspects):
        distance = find_mic(centres_cart[i] - sites, supercell)[1]
        there[i] = bool(np.min(distance) < ON_A_SITE_ANG)
    return there
