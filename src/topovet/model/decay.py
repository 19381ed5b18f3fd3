"""How H(R) falls off with the true distance between Wannier functions."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from ase.geometry import minkowski_reduce

from topovet.arrays import FloatArray
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel
from topovet.units import MEV_PER_EV

BIN_ANG = 0.25
"""Width of the distance bins."""

RIM_FRACTION = 0.9
"""Hoppings beyond this fraction of the supercell's inscribed radius stand on the rim."""

ON_SITE_ANG = 0.1
"""Elements closer than this are on-site terms, not hoppings."""


@dataclass(frozen=True, slots=True)
class DecayProfile:
    """Largest |H_mn(R)| by distance.

    Attributes
    ----------
    distances_ang, largest_mev
        Distance |tau_n + R - tau_m| at the middle of each bin that holds anything, angstrom, and
        the largest element there, meV.
    rim_ang
        Distance from which elements count as on the rim: nine tenths of the radius of the sphere
        inscribed in the Wigner-Seitz cell of the supercell; None where the mesh is unknown.
    rim_mev
        Largest element on the rim; None likewise.
    largest_hopping_mev
        Largest element off the site.
    positions
        "declared sites", "Wannier centres" or "lattice vectors" (where no sites are known and
        distance means |R|).
    """

    distances_ang: tuple[float, ...]
    largest_mev: tuple[float, ...]
    rim_ang: float | None
    rim_mev: float | None
    largest_hopping_mev: float
    positions: str


def measure_decay(
    model: TightBindingModel,
    crystal: Crystal,
    sites_frac: FloatArray | None,
    mp_grid: tuple[int, int, int] | None,
    *,
    positions: str = "declared sites",
) -> DecayProfile:
    """Fall-off of a Hamiltonian that was read with its shifts.

    In 2D distances are taken in the plane.

    Parameters
    ----------
    model
        With degeneracies and shifts applied.
    crystal
        Cell and periodic directions.
    sites_frac
        (n_orb, 3) sites; None takes |R| for the distance.
    mp_grid
        Mesh whose supercell limits the range.
    positions
        What the sites are, see `DecayProfile`.
    """
    n_orb = model.n_orb
    sites = np.zeros((n_orb, 3)) if sites_frac is None else np.asarray(sites_frac, dtype=float)
    between = (sites[None, :, :] - sites[:, None, :]) * np.array(crystal.periodic)
    rim_ang = None if mp_grid is None else RIM_FRACTION * _inscribed_radius(crystal, mp_grid)
    largest = np.zeros(1)
    hopping, rim = 0.0, 0.0
    for r_cell, h in zip(model.r_cells, model.h_r, strict=True):
        distance = np.linalg.norm((between + r_cell) @ crystal.cell, axis=2)
        size = np.abs(h)
        index = (distance / BIN_ANG).astype(int)
        if index.max() >= len(largest):
            largest = np.concatenate([largest, np.zeros(index.max() + 1 - len(largest))])
        np.maximum.at(largest, index, size)
        hopping = max(hopping, float(size[distance > ON_SITE_ANG].max(initial=0.0)))
        if rim_ang is not None:
            rim = max(rim, float(size[distance >= rim_ang].max(initial=0.0)))
    filled = np.nonzero(largest)[0]
    return DecayProfile(
        distances_ang=tuple(((filled + 0.5) * BIN_ANG).tolist()),
        largest_mev=tuple((MEV_PER_EV * largest[filled]).tolist()),
        rim_ang=rim_ang,
        rim_mev=None if rim_ang is None else MEV_PER_EV * rim,
        largest_hopping_mev=MEV_PER_EV * hopping,
        positions="lattice vectors" if sites_frac is None else positions,
    )


def _inscribed_radius(crystal: Crystal, mp_grid: tuple[int, int, int]) -> float:
    """Half of the shortest supercell vector along periodic directions, angstrom."""
    supercell = crystal.cell * np.array(mp_grid)[:, None]
    reduced = minkowski_reduce(supercell, pbc=crystal.periodic)[0]
    lengths = np.linalg.norm(reduced, axis=1)
    return 0.5 * float(lengths[np.array(crystal.periodic)].min())
