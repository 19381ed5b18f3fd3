"""The linear problem behind inversion without declared orbitals.

Inversion takes site s to site p(s), 2c - x_s = x_p(s) + T_s, and turns its functions by an unknown
unitary block U_s. That it is a symmetry is linear in the blocks:

    U_s H_st(R) = H_p(s)p(t)(-R + T_t - T_s) U_t        for all s, t, R.

The sum of the squared violations is a Hermitian form in the elements of the blocks, and its lowest
eigenvector is the inversion; see Procrustes problems in Golub and Van Loan, Matrix Computations
(4th ed., 2013), section 6.4.1, for the step to unitary blocks. With spin the blocks are u_s (x) 1:
inversion does not act on spin, and without this a weak spin-orbit coupling leaves the spin
rotation that goes with inversion open.

Only strong bonds are used at first. Noise enters with every equation, information with the strong
ones, and the small hoppings of a long-ranged model would drown it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import eigh

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray, frozen
from topovet.errors import NoInversionError
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel, r_index
from topovet.model.nearest_image import nearest_images
from topovet.symmetry.inversion import moved_hopping
from topovet.symmetry.sites import SiteAssignment

SITE_MATCH_ANG = 0.2
"""How far the image of a site may be from a site. Sites off the atoms are means of scattered
centres; whether inversion holds is for the Hamiltonian to say, not for them."""

BOND_CUTS = (0.1, 0.02, 0.0)
"""Bonds used: those whose block has at least this share of the strongest one's Frobenius norm. The
weaker ones are taken in only where the stronger leave more than one solution."""

DECOUPLED_EV = 1e-3
"""A block that misses the equations by less than this (root mean square per function) is as good as
exact: files are rounded, and sound Wannier functions keep inversion to less."""

SAME_MISFIT = 3.0
"""Eigenvalues within this factor of the lowest one are solutions on a par with it."""

GOOD_RATIO = 10.0
"""Ratio of the first eigenvalue that is no solution to the last that is, above which the solution
stands out (trials on noisy models: right in all cases)."""

MAX_SOLUTIONS = 24
"""More solutions than this are not told apart: the blocks are not determined at all."""

MAX_UNKNOWNS = 3000
"""Largest problem that is solved, in complex unknowns; its matrix takes 144 MB."""


@dataclass(frozen=True, slots=True, eq=False)
class SiteInversion:
    """Inversion of the sites: partner (n_sites,), and the cells T_s (n_sites, 3) of the images."""

    centre_frac: FloatArray
    partner: IntArray
    cells: IntArray


@dataclass(frozen=True, slots=True, eq=False)
class BlockSolution:
    """Lowest eigenvectors of the misfit of all blocks.

    Attributes
    ----------
    vectors
        (n_solutions, n_orb, n_orb) real-space inversions up to normalisation, one for each
        eigenvector that counts as a solution; element [m, n] takes function n to function m.
    eigenvalues
        Lowest eigenvalues, eV^2: mean square misfit per function.
    n_solutions
        Eigenvalues that are solutions: within `SAME_MISFIT` of the lowest, or of `DECOUPLED_EV`
        squared.
    ratio
        First eigenvalue that is no solution over the last that is.
    misfit
        Root of the lowest eigenvalue, relative to the bonds used: 0 exact, 1 nothing in common.
    bond_cut
        Entry of `BOND_CUTS` used.
    n_bonds
        Blocks (s, t, R) used.
    """

    vectors: ComplexArray
    eigenvalues: FloatArray
    n_solutions: int
    ratio: float
    misfit: float
    bond_cut: float
    n_bonds: int

    def __post_init__(self) -> None:
        object.__setattr__(self, "vectors", frozen(self.vectors))
        object.__setattr__(self, "eigenvalues", frozen(self.eigenvalues))


def invert_sites(sites: SiteAssignment, crystal: Crystal, centre_frac: FloatArray) -> SiteInversion:
    """Where inversion about a centre takes the sites.

    Raises
    ------
    NoInversionError
        A site has no image, or one with another number of functions.
    """
    centre = np.asarray(centre_frac, dtype=float)
    images = 2 * centre - sites.positions_frac
    lattice, distance = nearest_images(
        images[:, None, :] - sites.positions_frac[None, :, :], crystal.cell
    )
    partner = distance.argmin(axis=1)
    off = distance[np.arange(sites.n_sites), partner]
    if off.max(initial=0.0) > SITE_MATCH_ANG:
        worst = int(off.argmax())
        raise NoInversionError(
            f"inversion moves the site of function {_first(sites, worst)} "
            f"{off[worst]:.2f} angstrom away from every site"
        )
    unlike = np.flatnonzero(sites.counts[partner] != sites.counts)
    if len(unlike) or len(np.unique(partner)) < sites.n_sites:
        s = int(unlike[0]) if len(unlike) else 0
        raise NoInversionError(
            f"inversion takes the {sites.counts[s]} functions on the site of function "
            f"{_first(sites, s)} to a site with {sites.counts[partner[s]]}"
        )
    cells = lattice[np.arange(sites.n_sites), partner]
    return SiteInversion(centre, partner, np.where(np.array(crystal.periodic), cells, 0))


def solve_blocks(
    model: TightBindingModel, sites: SiteAssignment, images: SiteInversion, *, spin: int
) -> BlockSolution:
    """The inversion blocks that the Hamiltonian fits best.

    Parameters
    ----------
    model
        H(R).
    sites, images
        From `assign_sites` and `invert_sites`.
    spin
        2 to keep the blocks free of spin (functions 2i and 2i + 1 are the spin components of one
        orbital), 1 to leave them free.

    Returns
    -------
    BlockSolution
        With the strongest bonds that leave one solution; else with those that leave fewest.

    Raises
    ------
    NoInversionError
        More than `MAX_UNKNOWNS` unknowns.
    """
    problem = _prepare(model, sites, images, spin)
    best: BlockSolution | None = None
    for cut in BOND_CUTS:
        found = _solve(problem, cut)
        if best is None or _rank(found) > _rank(best):
            best = found
        if best.n_solutions == 1 and best.ratio >= GOOD_RATIO:
            break
    assert best is not None
    return best


def _rank(solution: BlockSolution) -> tuple[bool, int, float]:
    return solution.ratio >= SAME_MISFIT, -solution.n_solutions, solution.ratio


@dataclass(frozen=True, slots=True, eq=False)
class _Problem:
    """Hoppings with functions sorted by site, in their home cells, mean energy removed."""

    order: IntArray
    r_cells: IntArray
    h_r: ComplexArray  # one row of zeros at the end: what an absent R holds
    norms: FloatArray  # (n_r + 1, n_sites, n_sites) Frobenius norm of each block
    bounds: IntArray
    images: SiteInversion
    spin: int

    def sizes(self) -> IntArray:
        return np.asarray(np.diff(self.bounds) // self.spin)


def _prepare(
    model: TightBindingModel, sites: SiteAssignment, images: SiteInversion, spin: int
) -> _Problem:
    order = np.argsort(sites.site_of, kind="stable")
    bounds = np.concatenate([[0], np.cumsum(sites.counts)])
    unknowns = int(((sites.counts // spin) ** 2).sum())
    if unknowns > MAX_UNKNOWNS:
        raise NoInversionError(
            f"the blocks have {unknowns} elements, more than the {MAX_UNKNOWNS} that are solved for"
        )
    r_cells, h_r = model.r_cells, model.h_r
    if sites.homes.any():
        r_cells, h_r = moved_hopping(r_cells, h_r, -sites.homes)
    h = np.concatenate([h_r[:, order[:, None], order], np.zeros((1, *h_r.shape[1:]))])
    origin = int(np.flatnonzero(~r_cells.any(axis=1))[0])
    # the mean energy says nothing about inversion, and would hide in the norms
    h[origin] -= np.trace(h[origin]).real / len(order) * np.eye(len(order))
    squares = np.abs(h) ** 2
    squares = np.add.reduceat(np.add.reduceat(squares, bounds[:-1], axis=1), bounds[:-1], axis=2)
    return _Problem(order, r_cells, h, np.sqrt(squares), bounds, images, spin)


def _solve(problem: _Problem, cut: float) -> BlockSolution:
    normal, weight, n_bonds = _normal_matrix(problem, cut)
    wanted = min(len(normal), MAX_SOLUTIONS + 1)
    values, vectors = eigh(normal, subset_by_index=(0, wanted - 1))
    values = np.maximum(values, 0.0) / problem.spin
    n_solutions, ratio = _count_solutions(values, len(normal))
    misfit = np.sqrt(values[0] * len(problem.order) / weight) if weight > 0 else 0.0
    blocks = [_unpack(problem, vectors[:, i]) for i in range(min(n_solutions, MAX_SOLUTIONS))]
    return BlockSolution(np.array(blocks), values, n_solutions, ratio, float(misfit), cut, n_bonds)


def _count_solutions(values: FloatArray, n_unknowns: int) -> tuple[int, float]:
    """How many of the lowest eigenvalues are solutions, and by how much the next one is larger."""
    n_solutions = int((values <= SAME_MISFIT * max(DECOUPLED_EV**2, values[0])).sum())
    floor = max(values[n_solutions - 1], DECOUPLED_EV**2)
    if n_solutions < len(values):
        return n_solutions, float(values[n_solutions] / floor)
    # there is no next one: all blocks there are solve the equations, or none does
    exact = n_unknowns == 1 or floor <= SAME_MISFIT * DECOUPLED_EV**2
    return n_solutions, np.inf if exact and n_solutions <= MAX_SOLUTIONS else 0.0


def _normal_matrix(problem: _Problem, cut: float) -> tuple[ComplexArray, float, int]:
    """Matrix of sum |U_s A - B U_t|^2 over the bonds, sum |A|^2 + |B|^2, number of bonds.

    With u the elements of the blocks row by row, |U A|^2 has the matrix 1 (x) (A A†)^T, |B U|^2
    has B†B (x) 1, and the cross term is a product of A and B summed over R and spin: one matrix
    product for each pair of sites.
    """
    size, n_sites = problem.sizes(), len(problem.bounds) - 1
    start = np.concatenate([[0], np.cumsum(size**2)])
    normal = np.zeros((start[-1], start[-1]), dtype=np.complex128)
    weight, n_bonds = 0.0, 0
    strong = _strong_bonds(problem, cut)
    for s in range(n_sites):
        row = slice(start[s], start[s + 1])
        for t in range(n_sites):
            column = slice(start[t], start[t + 1])
            a, b = _pairs_of_blocks(problem, strong, s, t)
            if not len(a):
                continue
            n_bonds += len(a) // problem.spin**2
            weight += float(np.vdot(a, a).real + np.vdot(b, b).real)
            a_rows = a.transpose(1, 0, 2).reshape(size[s], -1)
            b_columns = b.reshape(-1, size[t])
            normal[row, row] += np.kron(np.eye(size[s]), a_rows.conj() @ a_rows.T)
            normal[column, column] += np.kron(b_columns.conj().T @ b_columns, np.eye(size[t]))
            cross = b.reshape(len(b), -1).conj().T @ a.reshape(len(a), -1)
            cross = cross.reshape(size[s], size[t], size[s], size[t]).transpose(1, 3, 0, 2)
            cross = cross.reshape(size[t] ** 2, size[s] ** 2)
            normal[column, row] -= cross
            normal[row, column] -= cross.conj().T
    return normal, weight, n_bonds


def _strong_bonds(problem: _Problem, cut: float) -> BoolArray:
    """(n_r + 1, n_sites, n_sites) blocks that are used whatever their partner is."""
    norms = problem.norms
    between = norms.copy()
    origin = np.append(~problem.r_cells.any(axis=1), False)
    on_site = origin[:, None, None] & np.eye(norms.shape[1], dtype=bool)
    between[on_site] = 0.0
    return np.asarray((norms >= cut * between.max(initial=0.0)) | on_site)


def _pairs_of_blocks(
    problem: _Problem, strong: BoolArray, s: int, t: int
) -> tuple[ComplexArray, ComplexArray]:
    """A = H_st(R) and B, what it must become, for each bond (and pair of spins) of two sites."""
    partner, cells = problem.images.partner, problem.images.cells
    at = r_index(problem.r_cells, -problem.r_cells + cells[t] - cells[s])
    here = np.flatnonzero(strong[:-1, s, t] | strong[at, partner[s], partner[t]])
    a = problem.h_r[:, _span(problem, s), _span(problem, t)][here]
    b = problem.h_r[:, _span(problem, partner[s]), _span(problem, partner[t])][at[here]]
    return _by_spin(a, problem.spin), _by_spin(b, problem.spin)


def _span(problem: _Problem, site: int) -> slice:
    return slice(int(problem.bounds[site]), int(problem.bounds[site + 1]))


def _by_spin(blocks: ComplexArray, spin: int) -> ComplexArray:
    """(n, spin a, spin b) blocks -> (n spin^2, a, b), one for each pair of spin components."""
    n, rows, columns = blocks.shape
    split = blocks.reshape(n, rows // spin, spin, columns // spin, spin)
    by_spin = split.transpose(0, 2, 4, 1, 3).reshape(-1, rows // spin, columns // spin)
    return np.asarray(by_spin)


def _unpack(problem: _Problem, vector: ComplexArray) -> ComplexArray:
    """(n_orb, n_orb) matrix of one eigenvector, in the model's order of functions."""
    size = problem.sizes()
    matrix = np.zeros(problem.h_r.shape[1:], dtype=np.complex128)
    start = 0
    for s, n in enumerate(size):
        block = vector[start : start + n * n].reshape(n, n)
        target = _span(problem, int(problem.images.partner[s]))
        matrix[target, _span(problem, s)] = np.kron(block, np.eye(problem.spin))
        start += n * n
    back = np.argsort(problem.order)
    return matrix[back[:, None], back]


def _first(sites: SiteAssignment, site: int) -> int:
    """Number of the first function of a site, counted from 1 as the files do."""
    return int(np.argmax(sites.site_of == site)) + 1
