"""Where a crystal is cut: the natural surface, and which atoms end up on either side."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.boundary.layers import CHUNK_BYTES
from topovet.boundary.recut import Miller, Recut
from topovet.model.crystal import Crystal
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel

LARGEST_INDEX = 2
"""Surfaces up to these Miller indices are looked at for the natural one."""

SAME_COST = 1.02
"""Planes whose cut costs up to this factor more than the least are as good."""

POLAR_COST = 1.7
"""A cut that leaves unlike faces counts so many times. In zinc blende bonds across (111) are 0.82
of those across (110), along which it cleaves; in BiTeI those across its van der Waals gap, which is
polar too, are 0.19 of the next least, under pressure 0.40: 1.3 to 2.4 says the same."""

MESH, MESH_WORK = (4, 8), 400
"""Points of the mesh of the density matrix along each direction, and that number times orbitals;
from 8 points on, bond energies of Sb, a semimetal, move by less than half of a percent."""

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


@dataclass(frozen=True, slots=True)
class CleavagePlane:
    """A plane that the crystal may be cut along.

    Attributes
    ----------
    miller
        In the Hamiltonian's own cell.
    bond_energy_ev_ang2
        Energy of the occupied bands that couplings across the cut contribute, less is likelier;
        eV/angstrom^2.
    polar
        Whether the two faces that the cut leaves differ, as no operation turns the normal round.
    """

    miller: Miller
    bond_energy_ev_ang2: float
    polar: bool

    @property
    def cost(self) -> float:
        """What planes are ranked by."""
        return self.bond_energy_ev_ang2 * (POLAR_COST if self.polar else 1.0)


def rank_surfaces(
    model: TightBindingModel,
    crystal: Crystal,
    positions_frac: FloatArray | None,
    filling: int,
    rotations: IntArray | None = None,
) -> tuple[CleavagePlane, ...]:
    """Planes up to `LARGEST_INDEX`, the likeliest to cleave first; in 2D the edge along a_1 alone.

    Ranked by the bond energy across the widest gap between atoms, per area: minus the sum of
    Re rho_mn* H_mn over pairs on different sides, with the density matrix rho of the filled bands
    (Hoffmann 1988; what hopping across the cut adds to the energy of the bands). Filled shells on
    both sides of a gap cost nothing, however much they overlap, so that layered crystals are cut
    between their layers and antimony between its bilayers. A cut that leaves unlike faces is
    charged and counts `POLAR_COST` times (Tasker 1979): zinc blende is cut along (110) of its
    cubic cell though (111) has fewer bonds. Of equal ones the densest lattice planes, then the
    plainest indices. A guess: repulsion, relaxation and charge itself are not weighed.

    Parameters
    ----------
    model, crystal
        The Hamiltonian and its cell.
    positions_frac
        (n_orb, 3) sites of the Wannier functions; None where they are not known, then home cells
        are cut apart as they are.
    filling
        Occupied bands.
    rotations
        (n, 3, 3) integer point group of the structure, in the same cell; without it no cut counts
        as polar.

    References
    ----------
    Hoffmann, Solids and Surfaces (VCH, 1988); Hughbanks, Hoffmann, J. Am. Chem. Soc. 105, 3528
    (1983), doi:10.1021/ja00349a027. Tasker, J. Phys. C 12, 4977 (1979),
    doi:10.1088/0022-3719/12/22/036.
    """
    if crystal.dimension == 2:
        first = crystal.periodic.index(True)
        second = crystal.periodic.index(True, first + 1)
        h, k, l = (int(i == second) for i in range(3))
        return (CleavagePlane((h, k, l), 0.0, polar=False),)
    if positions_frac is None:
        positions_frac = np.zeros((model.n_orb, 3))
    bonds = _site_bonds(model, positions_frac, filling)
    volume = abs(float(np.linalg.det(crystal.cell)))
    inverse = np.linalg.inv(crystal.cell)
    lengths = {n: float(np.linalg.norm(inverse @ np.array(n))) for n in _half_of_all_indices()}
    planes = [
        CleavagePlane(n, bonds.cut_by(n, lengths[n]) / volume, _is_polar(n, rotations))
        for n in lengths
    ]
    return tuple(
        plane
        for group in _alike(planes)
        for plane in sorted(group, key=lambda p: _plainness(p.miller, lengths[p.miller]))
    )


def _alike(planes: list[CleavagePlane]) -> list[list[CleavagePlane]]:
    """Planes by cost, those that are as good as the first of a group together."""
    groups: list[list[CleavagePlane]] = []
    for plane in sorted(planes, key=lambda p: p.cost):
        if not groups or plane.cost > SAME_COST * groups[-1][0].cost:
            groups.append([])
        groups[-1].append(plane)
    return groups


def _plainness(miller: Miller, inverse_spacing: float) -> tuple[float, int, Miller]:
    """The densest lattice planes first, then small indices, positive ones and early ones."""
    h, k, l = miller
    plain = sum(2 * abs(c) + (c < 0) for c in miller)
    return round(inverse_spacing, 6), plain, (-h, -k, -l)


def next_likeliest(planes: tuple[CleavagePlane, ...]) -> CleavagePlane | None:
    """The first plane that is dearer than the likeliest, hence no image of it by symmetry."""
    groups = _alike(list(planes))
    group = groups[1] if len(groups) > 1 else []
    return next((p for p in planes if p in group), None)


def _is_polar(miller: Miller, rotations: IntArray | None) -> bool:
    """Whether no operation turns the plane's normal round; x' = W x takes planes n to n W^-1."""
    if rotations is None or not len(rotations):
        return False
    return not bool((np.array(miller) @ rotations == -np.array(miller)).all(axis=1).any())


@dataclass(frozen=True, slots=True, eq=False)
class _SiteBonds:
    """Bonds between sites: (n, 3) R, (n_sites, 3) sites, (n, n_sites, n_sites) energies, eV."""

    r_cells: IntArray
    sites: FloatArray
    energies: FloatArray

    def cut_by(self, miller: Miller, inverse_spacing: float) -> float:
        """Bond energy across one cut times the volume over the area: eV angstrom."""
        heights = self.sites @ np.array(miller)
        height, _ = widest_cut(heights, 1 / inverse_spacing)
        layer = np.floor(heights - height)
        crossed = np.abs((self.r_cells @ np.array(miller))[:, None, None] + layer - layer[:, None])
        # one cell of the surface has the area volume / spacing
        return max(0.0, float((self.energies * crossed).sum())) / inverse_spacing


def _site_bonds(model: TightBindingModel, positions_frac: FloatArray, filling: int) -> _SiteBonds:
    sites, member = np.unique(np.round(positions_frac, 4), axis=0, return_inverse=True)
    gather = np.zeros((len(sites), model.n_orb))
    gather[member.reshape(-1), np.arange(model.n_orb)] = 1.0
    energies = np.empty((len(model.r_cells), len(sites), len(sites)))
    k_frac, projectors = _filled(model, filling)
    step = max(1, CHUNK_BYTES // (16 * model.n_orb**2))
    for start in range(0, len(model.r_cells), step):
        part = slice(start, start + step)
        phases = np.exp(-2j * np.pi * (model.r_cells[part] @ k_frac.T)) / len(k_frac)
        rho = (phases @ projectors).reshape(-1, model.n_orb, model.n_orb)
        energies[part] = -gather @ (rho.conj() * model.h_r[part]).real @ gather.T
    return _SiteBonds(np.asarray(model.r_cells), sites, energies)


def _filled(model: TightBindingModel, filling: int) -> tuple[FloatArray, ComplexArray]:
    """(n_k, 3) mesh and (n_k, n_orb^2) projectors on the filled states."""
    n = int(np.clip(MESH_WORK // model.n_orb, *MESH))
    steps = (np.arange(n) + 0.5) / n
    k_frac = np.stack(np.meshgrid(steps, steps, steps, indexing="ij"), axis=-1).reshape(-1, 3)
    h = build_bloch_sum(model).at(k_frac)
    _, states = np.linalg.eigh(h)  # of the lower triangle, which is what is there
    filled = states[:, :, :filling]
    projectors = filled @ filled.conj().transpose(0, 2, 1)
    return k_frac, projectors.reshape(len(k_frac), -1)


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
