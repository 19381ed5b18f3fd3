"""Sites of the Wannier functions, from their centres or from their declared positions.

A site is a point that several functions share: an atom, or a place between atoms. Wannier centres
scatter around it by tenths of an angstrom, and are printed in whichever cell the run left them.
What symmetry needs is the site of each function and its home cell on it,

    function n sits at  positions_frac[site_of[n]] + homes[n]   (up to its offset).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import linear_sum_assignment
from scipy.sparse.csgraph import connected_components

from topovet.arrays import FloatArray, IntArray, frozen
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel
from topovet.model.nearest_image import image_distances, nearest_images

ATOM_REACH_ANG = 1.0
"""Farthest from its atom that a centre belongs to it; hybrids reach half an angstrom."""

ATOM_SHARE = 0.35
"""A centre belongs to its nearest atom only while it is nearer than this share of the summed
distances to the nearest two: 1/2 is the middle of a bond, which is a site of its own."""

CLUSTER_ANG = 0.5
"""Centres off every atom that are nearer to each other than this share a site."""

DECLARED_ANG = 0.05
"""Declared positions nearer to each other than this are one site."""

HOME_DOUBT_CELLS = 1.0
"""A printed home cell stands unless the hoppings put the function more than this many lattice
vectors away; the estimate is good to 0.5, and a supercell of a mesh is at least 2."""


@dataclass(frozen=True, slots=True, eq=False)
class SiteAssignment:
    """Which site and which cell each Wannier function is at.

    Attributes
    ----------
    positions_frac
        (n_sites, 3) fractional, the mean of the centres on the site, in the cell of the first.
        Not the atom: what the structure file says of the atoms is still to be tested.
    atoms
        (n_sites,) index of the atom, -1 off every atom.
    site_of
        (n_orb,) site of each function.
    homes
        (n_orb, 3) integer cell of each function relative to the first one on its site; 0 along
        directions that are not periodic.
    offsets_ang
        (n_orb,) distance of the centre from its atom, off the atoms from the site.
    source
        "centres" or "declared".
    rehomed
        Functions whose printed cell was replaced because the hoppings contradict it.
    relocated
        Functions whose centre is on no atom and that `relocate_strays` put on one.
    """

    positions_frac: FloatArray
    atoms: IntArray
    site_of: IntArray
    homes: IntArray
    offsets_ang: FloatArray
    source: str
    rehomed: tuple[int, ...] = ()
    relocated: tuple[int, ...] = ()

    def __post_init__(self) -> None:
        for name in ("positions_frac", "atoms", "site_of", "homes", "offsets_ang"):
            object.__setattr__(self, name, frozen(getattr(self, name)))

    @property
    def n_sites(self) -> int:
        return len(self.positions_frac)

    @property
    def counts(self) -> IntArray:
        """(n_sites,) functions on each site."""
        return np.asarray(np.bincount(self.site_of, minlength=self.n_sites), dtype=np.int64)

    @property
    def function_positions(self) -> FloatArray:
        """(n_orb, 3) site of each function in its own cell, fractional."""
        return np.asarray(self.positions_frac[self.site_of] + self.homes)


def assign_sites(
    centres_frac: FloatArray, crystal: Crystal, *, model: TightBindingModel | None = None
) -> SiteAssignment:
    """Sites from Wannier centres, without any declaration.

    A centre within `ATOM_REACH_ANG` of an atom, and clearly nearer to it than to the next one
    (`ATOM_SHARE`), belongs to the atom; the others cluster among themselves (`CLUSTER_ANG`).

    Parameters
    ----------
    centres_frac
        (n_orb, 3) fractional, in the home cells that R = 0 refers to, as far as they are known.
    crystal
        Cell, and atoms where there are any.
    model
        Settles home cells: Wannier90 knows a centre only modulo the supercell of the mesh, and the
        hoppings tell which image is meant, see `estimate_positions`.
    """
    centres = np.asarray(centres_frac, dtype=float).reshape(-1, 3)
    atom_of = _atom_of(centres, crystal)
    off = np.flatnonzero(atom_of < 0)
    label = atom_of.copy()
    label[off] = len(crystal.symbols) + _clusters(centres[off], crystal.cell, CLUSTER_ANG)
    found = _from_labels(centres, label, atom_of, crystal, "centres")
    return found if model is None else settle_homes(found, crystal, model)


def declared_sites(positions_frac: FloatArray, crystal: Crystal) -> SiteAssignment:
    """Sites from declared positions (n_orb, 3), in the cells in which they are written."""
    positions = np.asarray(positions_frac, dtype=float).reshape(-1, 3)
    label = _clusters(positions, crystal.cell, DECLARED_ANG)
    atom_of = _atom_of(positions, crystal, DECLARED_ANG)
    return _from_labels(positions, label, atom_of, crystal, "declared")


def nominal_positions(sites: SiteAssignment, crystal: Crystal) -> FloatArray:
    """(n_orb, 3) fractional: every function exactly on its atom, those off the atoms on their site.

    Equivalent sites come out equivalent to the last digit, which Wigner-Seitz shifts need: ties
    between images are shared within 1e-5 angstrom.
    """
    on_atoms = _on_atoms(sites.positions_frac, sites.atoms, crystal)
    return np.asarray(on_atoms[sites.site_of] + sites.homes)


def estimate_positions(model: TightBindingModel) -> tuple[FloatArray, IntArray]:
    """Where the functions sit relative to each other, from the hoppings alone.

    The mean of R weighted with |H_mn(R)|^2 is about tau_m - tau_n, since hoppings fall off with
    the distance R + tau_n - tau_m; the positions are the least-squares solution of all pairs. On
    the real cases of the tests it is right to 0.35 of a lattice vector.

    Returns
    -------
    tuple
        (n_orb, 3) fractional up to one shift for each coupled set, and (n_orb,) coupled set.
    """
    strength = np.abs(model.h_r) ** 2
    weight = strength.sum(axis=0)
    mean_r = np.einsum("rmn,rd->mnd", strength, model.r_cells.astype(float))
    mean_r /= np.where(weight > 0, weight, 1.0)[:, :, None]
    np.fill_diagonal(weight, 0.0)
    _, coupled = connected_components(weight > 1e-12 * weight.max(initial=0.0), directed=False)
    laplacian = np.diag(weight.sum(axis=1)) - weight
    towards = np.einsum("mn,mnd->md", weight, mean_r)
    positions = np.linalg.lstsq(laplacian, towards, rcond=1e-10)[0]
    return np.asarray(positions), np.asarray(coupled, dtype=np.int64)


def _atom_of(centres: FloatArray, crystal: Crystal, reach: float = ATOM_REACH_ANG) -> IntArray:
    """(n_orb,) atom each centre belongs to, -1 for none."""
    if not crystal.symbols or not len(centres):
        return np.full(len(centres), -1, dtype=np.int64)
    apart = centres[:, None, :] - crystal.positions_frac[None, :, :]
    distances = image_distances(apart, crystal.cell)[1]
    nearest = distances.min(axis=2).argmin(axis=1)
    first, second = np.partition(distances.reshape(len(centres), -1), 1, axis=1)[:, :2].T
    belongs = (first <= reach) & (first <= ATOM_SHARE * (first + second))
    return np.asarray(np.where(belongs, nearest, -1), dtype=np.int64)


def _clusters(points: FloatArray, cell: FloatArray, reach: float) -> IntArray:
    """(n,) cluster of each point: chains of points nearer than `reach`, modulo the lattice."""
    distances = nearest_images(points[:, None, :] - points[None, :, :], cell)[1]
    return np.asarray(connected_components(distances <= reach, directed=False)[1], dtype=np.int64)


def _from_labels(
    points: FloatArray, label: IntArray, atom_of: IntArray, crystal: Crystal, source: str
) -> SiteAssignment:
    """Sites in order of their first function; their positions, home cells and offsets."""
    _, first, site_of = np.unique(label, return_index=True, return_inverse=True)
    rank = np.argsort(np.argsort(first))
    site_of, first = rank[site_of.reshape(-1)], np.sort(first)
    homes = nearest_images(points - points[first][site_of], crystal.cell)[0]
    gathered = points - homes
    positions = np.zeros((len(first), 3))
    np.add.at(positions, site_of, gathered)
    positions /= np.bincount(site_of, minlength=len(first))[:, None]
    atoms = atom_of[first]
    nominal = _on_atoms(positions, atoms, crystal)
    offsets = np.linalg.norm((gathered - nominal[site_of]) @ crystal.cell, axis=1)
    homes = np.where(np.array(crystal.periodic), homes, 0)
    return SiteAssignment(positions, atoms, site_of, homes, offsets, source)


def _on_atoms(positions: FloatArray, atoms: IntArray, crystal: Crystal) -> FloatArray:
    """Each site's position replaced by the nearest image of its atom, where it has one."""
    if not crystal.symbols:
        return positions
    at = crystal.positions_frac[atoms]
    image = at + nearest_images(positions - at, crystal.cell)[0]
    return np.where((atoms >= 0)[:, None], image, positions)


def relocate_strays(
    sites: SiteAssignment, crystal: Crystal, model: TightBindingModel
) -> SiteAssignment | None:
    """Another reading: sites off the atoms belong to the atoms that have no function.

    A centre on a wrong branch of its Berry phase is anywhere, while its function sits on an atom.
    Which one is estimated from the hoppings; whether it is true is for the symmetry of H to say.

    Returns
    -------
    SiteAssignment or None
        None where no site is off the atoms, or there are fewer free atoms than such sites.
    """
    strays = np.flatnonzero(sites.atoms < 0)
    free = np.setdiff1d(np.arange(len(crystal.symbols)), sites.atoms)
    if not len(strays) or len(free) < len(strays):
        return None
    deviation = _deviation(sites, crystal, model)
    expected = sites.function_positions - deviation
    at = np.array([expected[sites.site_of == s].mean(axis=0) for s in strays])
    apart = at[:, None, :] - crystal.positions_frac[free][None, :, :]
    lattice, distance = nearest_images(apart, crystal.cell)
    rows, columns = linear_sum_assignment(distance)
    positions, offsets = sites.positions_frac.copy(), sites.offsets_ang.copy()
    atoms, homes = sites.atoms.copy(), sites.homes.copy()
    for stray, atom, cell in zip(strays[rows], free[columns], lattice[rows, columns], strict=True):
        positions[stray], atoms[stray] = crystal.positions_frac[atom] + cell, atom
        members = sites.site_of == stray
        homes[members] = 0
        shift = positions[stray] - sites.positions_frac[stray]
        offsets[members] = np.linalg.norm(shift @ crystal.cell)
    moved = np.flatnonzero(np.isin(sites.site_of, strays))
    return replace(
        sites,
        positions_frac=positions,
        atoms=atoms,
        homes=homes,
        offsets_ang=offsets,
        relocated=tuple(moved.tolist()),
    )


def _deviation(sites: SiteAssignment, crystal: Crystal, model: TightBindingModel) -> FloatArray:
    """(n_orb, 3) printed position of each function minus where the hoppings put it."""
    estimate, coupled = estimate_positions(model)
    deviation = np.where(np.array(crystal.periodic), sites.function_positions - estimate, 0.0)
    for group in range(coupled.max(initial=-1) + 1):
        members = coupled == group
        deviation[members] -= np.median(deviation[members], axis=0)
    return deviation


def settle_homes(
    sites: SiteAssignment,
    crystal: Crystal,
    model: TightBindingModel,
    *,
    doubt_cells: float = HOME_DOUBT_CELLS,
) -> SiteAssignment:
    """Home cells that the hoppings contradict replaced by those they say.

    Parameters
    ----------
    sites, crystal, model
        As in `assign_sites`.
    doubt_cells
        Lattice vectors by which the hoppings must contradict; with 1/2 every cell is the nearest
        one to where they put the function, a guess that only symmetry can confirm.
    """
    deviation = _deviation(sites, crystal, model)
    wrong = np.any(np.abs(deviation) > doubt_cells, axis=1)
    if not wrong.any():
        return sites
    moved = np.where(wrong[:, None], np.round(deviation).astype(np.int64), 0)
    homes = sites.homes - moved
    first = np.unique(sites.site_of, return_index=True)[1]
    return replace(
        sites,
        positions_frac=sites.positions_frac + homes[first],
        homes=homes - homes[first][sites.site_of],
        rehomed=tuple(np.flatnonzero(wrong).tolist()),
    )
