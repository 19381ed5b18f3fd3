"""Where a crystal is cut: the natural surface, and which atoms end up on either side."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray, IntArray
from topovet.boundary.recut import Miller, Recut
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel

LARGEST_INDEX = 2
"""Surfaces up to these Miller indices are looked at for the natural one."""

SAME_COST = 1.02
"""Planes whose cut costs up to this factor more than the least are as good."""

SAME_GAP_ANG = 1e-2
"""Interlayer distances that differ by less are the same."""

SAME_PLANE_ANG = 0.05
"""Atoms whose heights differ by less form one plane when the termination is named."""


@dataclass(frozen=True, slots=True)
class Termination:
    """One of the two half-crystals that a cut leaves.

    Attributes
    ----------
    side
        "upper": the matter lies along +n, the surface looks along -n; "lower": the other way.
    atoms
        Chemical symbols of the outermost plane, "" where no atoms are known.
    """

    side: str
    atoms: str

    @property
    def name(self) -> str:
        return f"{self.side} half, {self.atoms} outermost" if self.atoms else f"{self.side} half"


@dataclass(frozen=True, slots=True)
class Cut:
    """A plane between atoms.

    Attributes
    ----------
    height
        Of the cut in units of the lattice planes' distance, 0 to 1.
    width_ang
        Distance of the atomic planes on its two sides; None where home cells are cut apart as they
        are, and what ends up outermost is not known.
    terminations
        The upper half-crystal, then the lower one.
    """

    height: float
    width_ang: float | None
    terminations: tuple[Termination, Termination]


def natural_surface(
    model: TightBindingModel, crystal: Crystal, positions_frac: FloatArray | None
) -> Miller:
    """Miller indices of a likely cleavage plane; in two dimensions the edge along a_1.

    The first of `rank_surfaces`, which see.
    """
    return rank_surfaces(model, crystal, positions_frac)[0]


def rank_surfaces(
    model: TightBindingModel, crystal: Crystal, positions_frac: FloatArray | None
) -> tuple[Miller, ...]:
    """Surfaces, the likeliest cleavage plane first; in two dimensions the edge along a_1 alone.

    Of all planes up to `LARGEST_INDEX` the one across whose widest gap the Hamiltonian couples
    least: sum |H_mn(R)|^2 over the pairs on different sides, per area. In second order that is the
    order of the bonding energy that the cut costs, so that layered crystals are cut between their
    layers; of equal ones the densest lattice planes, then the plainest indices. A guess: neither
    relaxation nor charge is weighed.

    Parameters
    ----------
    model, crystal
        The Hamiltonian and its cell.
    positions_frac
        (n_orb, 3) sites of the Wannier functions; None where they are not known, then home cells
        are cut apart as they are.
    """
    if crystal.dimension == 2:
        first = crystal.periodic.index(True)
        second = crystal.periodic.index(True, first + 1)
        h, k, l = (int(i == second) for i in range(3))
        return ((h, k, l),)
    if positions_frac is None:
        positions_frac = np.zeros((model.n_orb, 3))
    bonds = _site_bonds(model, positions_frac)
    inverse = np.linalg.inv(crystal.cell)
    lengths = {n: float(np.linalg.norm(inverse @ np.array(n))) for n in _half_of_all_indices()}
    cost = {n: bonds.cut_by(n, lengths[n]) for n in lengths}
    least = min(cost.values())

    def rank(n: Miller) -> tuple[float, float, int, Miller]:
        plain = sum(2 * abs(c) + (c < 0) for c in n)
        dearer = 0.0 if cost[n] <= SAME_COST * least else cost[n]
        return dearer, round(lengths[n], 6), plain, (-n[0], -n[1], -n[2])

    return tuple(sorted(lengths, key=rank))


@dataclass(frozen=True, slots=True, eq=False)
class _SiteBonds:
    """Squared couplings between sites: (n, 3) R, (n_sites, 3) sites, (n, n_sites, n_sites) eV^2."""

    r_cells: IntArray
    sites: FloatArray
    weights: FloatArray

    def cut_by(self, miller: Miller, inverse_spacing: float) -> float:
        """Sum of |H|^2 across one cut, up to the volume of the cell, which all planes share."""
        heights = self.sites @ np.array(miller)
        height, _ = widest_cut(heights, 1 / inverse_spacing)
        layer = np.floor(heights - height)
        crossed = np.abs((self.r_cells @ np.array(miller))[:, None, None] + layer - layer[:, None])
        # one cell of the surface has the area volume / spacing
        return float((self.weights * crossed).sum()) / inverse_spacing


def _site_bonds(model: TightBindingModel, positions_frac: FloatArray) -> _SiteBonds:
    sites, member = np.unique(np.round(positions_frac, 4), axis=0, return_inverse=True)
    gather = np.zeros((len(sites), model.n_orb))
    gather[member.reshape(-1), np.arange(model.n_orb)] = 1.0
    weights = gather @ np.abs(model.h_r) ** 2 @ gather.T
    return _SiteBonds(np.asarray(model.r_cells), sites, weights)


def _half_of_all_indices() -> list[Miller]:
    """Primitive indices, one of each pair n, -n."""
    reach = range(-LARGEST_INDEX, LARGEST_INDEX + 1)
    return [
        (h, k, l)
        for h, k, l in itertools.product(reach, repeat=3)
        if math.gcd(h, k, l) == 1 and (h, k, l) > (0, 0, 0)
    ]


def widest_cut(heights: FloatArray, spacing_ang: float) -> tuple[float, float]:
    """Middle and width (angstrom) of the widest empty interval between heights modulo 1.

    With no heights at all the cut is at 0 and as wide as the planes are apart.
    """
    if len(heights) == 0:
        return 0.0, spacing_ang
    ordered = np.sort(np.asarray(heights) % 1.0)
    following = np.append(ordered[1:], ordered[0] + 1.0)
    gaps = following - ordered
    # of equally wide intervals the first, whatever the last digits say
    widest = int(np.flatnonzero(gaps > gaps.max() - SAME_GAP_ANG / spacing_ang)[0])
    return float((ordered[widest] + gaps[widest] / 2) % 1.0), float(gaps[widest] * spacing_ang)


def place_cut(crystal: Crystal, cut: Recut) -> Cut:
    """The cut through the widest gap between atomic planes, and what it lays bare."""
    heights = np.asarray(crystal.positions_frac) @ np.array(cut.miller)
    height, width = widest_cut(heights, cut.spacing_ang)
    above = (heights - height) % 1.0  # depth below the upper half's surface
    near = SAME_PLANE_ANG / cut.spacing_ang
    names = []
    for depth in (above, 1.0 - above):
        outermost = depth < depth.min(initial=1.0) + near
        symbols = [s for s, out in zip(crystal.symbols, outermost, strict=True) if out]
        names.append(" and ".join(dict.fromkeys(symbols)))
    return Cut(height, width, (Termination("upper", names[0]), Termination("lower", names[1])))


def home_cell_cut() -> Cut:
    """The cut between the cells that the file counts from, where no sites are declared."""
    return Cut(0.0, None, (Termination("upper", ""), Termination("lower", "")))


def layers_of(positions_frac: FloatArray, cut: Recut, height: float) -> IntArray:
    """(n_orb,) layer, counted between cuts at `height` + integers, of functions at R = 0."""
    heights = np.asarray(positions_frac) @ np.array(cut.miller)
    return np.asarray(np.floor(heights - height), dtype=np.int64)
