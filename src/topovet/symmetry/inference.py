"""Inversion read off the Hamiltonian itself, with nothing declared but where the functions sit.

`inversion_blocks` finds the blocks up to phases. Here they become an operator: unitary by a polar
decomposition of each block, with P^2 = 1 by fixing the phase and taking the matrix sign.

What stays open is one sign of the whole operator, which no product over the TRIM notices (it turns
kappa into -kappa), and one for each further set of functions that no hopping connects to the rest;
those are returned as alternatives, and an index that depends on them is not known.

A Hamiltonian without inversion can have a best operator that stands out among the others. So the
structure must have inversion too, the misfit must be small, and the residual is reported for the
verdict to judge.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, frozen, largest_spectral_norm
from topovet.errors import NoInversionError
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel, r_index
from topovet.model.nearest_image import nearest_images
from topovet.symmetry.decoupled import involution, sign_alternatives
from topovet.symmetry.inversion import inverted_hopping
from topovet.symmetry.inversion_blocks import (
    GOOD_RATIO,
    MAX_SOLUTIONS,
    SAME_MISFIT,
    BlockSolution,
    SiteInversion,
    invert_sites,
    solve_blocks,
)
from topovet.symmetry.results import InversionOperator
from topovet.symmetry.sites import SiteAssignment
from topovet.units import MEV_PER_EV

ATOM_MATCH_ANG = 0.1
"""How far inversion may take an atom from one of its kind."""

GOOD_MISFIT = 0.1
"""Relative misfit of the strong bonds up to which an inferred inversion is good; 20 meV of noise on
every hopping of the real cases of the tests makes it 0.04 to 0.07."""

MAX_MISFIT = 0.25
"""Relative misfit above which there is no inversion to speak of: BiTeI with its tellurium and
iodine taken for each other has 0.30."""

LEAST_PURITY = 0.8
"""Least overlap of the operator, after P^2 = 1 was imposed, with the solutions it is made of."""

FREE_SPIN_GAIN = 100.0
"""The blocks may act on spin where that lowers the squared misfit by this factor."""

FREE_SPIN_UNKNOWNS = 1500
"""Largest number of elements of such blocks for which that is tried: some seconds."""

SAME_RESIDUAL_MEV = 10.0
"""An operator with a residual below this is an alternative to one that fits better."""


@dataclass(frozen=True, slots=True, eq=False)
class InferredInversion:
    """Inversion as the Hamiltonian has it.

    Attributes
    ----------
    reliability
        "good", "doubtful" or "refused".
    reason
        Why it is not "good", in one clause; empty otherwise.
    centre_frac
        (3,) the centre it was sought about, fractional.
    operator
        None when refused for want of any solution. Its overall sign is a choice: the trace of its
        matrix is not negative.
    alternatives
        Operators that fit as well and differ by the sign of one decoupled set of functions; empty
        where all are coupled. An index counts only if it is the same with each of them.
    eigenvalue_ratio
        First eigenvalue of the misfit that is no solution over the last that is.
    null_space
        Number of solutions.
    misfit
        Relative misfit of the strong bonds, 0 to about 1.
    rms_residual_mev
        Root mean square over the zone of the eigenvalues of P H P^-1 - H.
    max_residual_mev
        Spectral norm of (P H P^-1 - H)(R), largest over R.
    purity
        Overlap of the operator, after unitarity and P^2 = 1 were imposed, with the solutions.
    acts_on_spin
        Whether the blocks had to be left free to act on spin.
    bond_cut, n_bonds
        Share of the strongest bond from which on bonds were used, and their number.
    structure_checked
        Whether there were atoms to confirm that the crystal has this inversion.
    """

    reliability: str
    reason: str
    centre_frac: FloatArray
    operator: InversionOperator | None
    alternatives: tuple[InversionOperator, ...]
    eigenvalue_ratio: float | None
    null_space: int | None
    misfit: float | None
    rms_residual_mev: float | None
    max_residual_mev: float | None
    purity: float | None
    acts_on_spin: bool
    bond_cut: float | None
    n_bonds: int
    structure_checked: bool

    def __post_init__(self) -> None:
        object.__setattr__(self, "centre_frac", frozen(self.centre_frac))


def infer_inversion(
    model: TightBindingModel,
    crystal: Crystal,
    sites: SiteAssignment,
    centre_frac: FloatArray,
    *,
    spinful: bool,
) -> InferredInversion:
    """Inversion about a centre from H(R) and the sites of its functions.

    Parameters
    ----------
    model
        H(R), spin interlaced.
    crystal
        Cell, and atoms where they are known: they must have the inversion too.
    sites
        From `assign_sites` or `declared_sites`.
    centre_frac
        (3,) fixed point, fractional.
    spinful
        Functions 2i and 2i + 1 are the up and down component of one orbital. Pass False also for
        spinors that are not ordered so; every function is then on its own.

    Returns
    -------
    InferredInversion
        Never raises: what cannot be inferred is refused with the reason.
    """
    centre = np.asarray(centre_frac, dtype=float)
    checked = bool(crystal.symbols)
    try:
        _check_structure(crystal, centre)
        images = invert_sites(sites, crystal, centre)
        solution, acts_on_spin = _solve(model, sites, images, spinful)
    except NoInversionError as error:
        return _refused(str(error), centre, checked)
    matrix, purity = involution(solution.vectors)
    operator = _operator(_signed(matrix), sites, images)
    rms, largest = residuals_mev(model, operator)
    reliability, reason = _judge(solution, purity)
    alternatives: tuple[InversionOperator, ...] = ()
    if solution.n_solutions > 1 and reliability != "refused":
        alternatives = _alternatives(model, operator, solution, sites, images, rms)
    return InferredInversion(
        reliability=reliability,
        reason=reason,
        centre_frac=centre,
        operator=operator,
        alternatives=alternatives,
        eigenvalue_ratio=solution.ratio,
        null_space=solution.n_solutions,
        misfit=solution.misfit,
        rms_residual_mev=rms,
        max_residual_mev=largest,
        purity=purity,
        acts_on_spin=acts_on_spin,
        bond_cut=solution.bond_cut,
        n_bonds=solution.n_bonds,
        structure_checked=checked,
    )


def residuals_mev(model: TightBindingModel, operator: InversionOperator) -> tuple[float, float]:
    """Residual P H P^-1 - H: root mean square over zone and bands, and largest norm over R, meV.

    The first is sqrt(sum_R |residual(R)|_F^2 / n_orb), by Parseval the root mean square of the
    eigenvalues of the residual over all k.
    """
    r_new, difference = inverted_hopping(model, operator)
    at = r_index(r_new, model.r_cells)
    difference[at[at >= 0]] -= model.h_r[at >= 0]
    lost = model.h_r[at < 0]
    squares = float(np.vdot(difference, difference).real + np.vdot(lost, lost).real)
    largest = max(largest_spectral_norm(difference), largest_spectral_norm(lost))
    return MEV_PER_EV * float(np.sqrt(squares / model.n_orb)), MEV_PER_EV * largest


def align_sign(operator: InversionOperator, reference: InversionOperator) -> InversionOperator:
    """The operator or its negative, whichever is nearer to a reference in the same basis."""
    overlap = np.vdot(reference.matrix, operator.matrix).real
    return operator if overlap >= 0 else _with_matrix(operator, -operator.matrix)


def _check_structure(crystal: Crystal, centre: FloatArray) -> None:
    if not crystal.symbols:
        return
    positions = crystal.positions_frac
    apart = (2 * centre - positions)[:, None, :] - positions[None, :, :]
    distance = nearest_images(apart, crystal.cell)[1]
    kinds = np.array(crystal.symbols)
    distance[kinds[:, None] != kinds[None, :]] = np.inf
    worst = float(distance.min(axis=1).max())
    if worst > ATOM_MATCH_ANG:
        where = ", ".join(f"{c:.4g}" for c in centre)
        raise NoInversionError(f"the structure has no inversion about ({where})")


def _solve(
    model: TightBindingModel, sites: SiteAssignment, images: SiteInversion, spinful: bool
) -> tuple[BlockSolution, bool]:
    """The blocks, and whether they act on spin."""
    if not spinful:
        return solve_blocks(model, sites, images, spin=1), False
    _check_spin_pairs(sites)
    keeping = solve_blocks(model, sites, images, spin=2)
    if keeping.misfit <= GOOD_MISFIT or (sites.counts**2).sum() > FREE_SPIN_UNKNOWNS:
        return keeping, False
    # localised functions may mix the spins, each pair in its own way
    free = solve_blocks(model, sites, images, spin=1)
    gained = free.misfit**2 * FREE_SPIN_GAIN <= keeping.misfit**2
    better = gained and free.n_solutions == 1 and free.ratio >= GOOD_RATIO
    return (free, True) if better else (keeping, False)


def _check_spin_pairs(sites: SiteAssignment) -> None:
    up, down = sites.site_of[::2], sites.site_of[1::2]
    if len(up) != len(down):
        raise NoInversionError(f"{len(sites.site_of)} functions are no whole number of spin pairs")
    apart = (up != down) | (sites.homes[::2] != sites.homes[1::2]).any(axis=1)
    if apart.any():
        n = 2 * int(apart.argmax()) + 1
        raise NoInversionError(f"functions {n} and {n + 1}, a spin pair, sit on two sites")


def _operator(
    matrix: ComplexArray, sites: SiteAssignment, images: SiteInversion
) -> InversionOperator:
    shifts = images.cells[sites.site_of] - sites.homes
    return InversionOperator(images.centre_frac, matrix, shifts, sites.homes)


def _with_matrix(operator: InversionOperator, matrix: ComplexArray) -> InversionOperator:
    return InversionOperator(operator.centre_frac, matrix, operator.shifts, operator.homes)


def _signed(matrix: ComplexArray) -> ComplexArray:
    """The matrix or its negative: trace positive, or the first function kept in sign."""
    trace = float(np.trace(matrix).real)
    if abs(trace) < 0.5:
        lead = matrix[np.abs(matrix[:, 0]).argmax(), 0]
        trace = float(lead.real if abs(lead.real) > 1e-3 else lead.imag)
    return matrix if trace >= 0 else -matrix


def _judge(solution: BlockSolution, purity: float) -> tuple[str, str]:
    ratio, misfit = solution.ratio, solution.misfit
    if solution.n_solutions > MAX_SOLUTIONS:
        return "refused", (
            f"more than {MAX_SOLUTIONS} independent sets of blocks fit as well (misfit "
            f"{100 * misfit:.0f} %)"
        )
    if ratio < SAME_MISFIT:
        return "refused", (
            f"the best blocks do not stand out (eigenvalue ratio {ratio:.2g}, at least "
            f"{SAME_MISFIT:g} needed)"
        )
    if misfit > MAX_MISFIT:
        return "refused", (
            f"the best operator misses the strong bonds by {100 * misfit:.0f} % (at most "
            f"{100 * MAX_MISFIT:.0f} %)"
        )
    if purity < LEAST_PURITY:
        return "refused", f"the best operator is no involution (overlap {purity:.2f} with one)"
    if ratio < GOOD_RATIO:
        return "doubtful", f"the best blocks stand out little (eigenvalue ratio {ratio:.2g})"
    if misfit > GOOD_MISFIT:
        return "doubtful", f"the operator misses the strong bonds by {100 * misfit:.0f} %"
    return "good", ""


def _alternatives(
    model: TightBindingModel,
    operator: InversionOperator,
    solution: BlockSolution,
    sites: SiteAssignment,
    images: SiteInversion,
    rms_mev: float,
) -> tuple[InversionOperator, ...]:
    """Operators with the sign of one decoupled set reversed that fit the Hamiltonian as well."""
    found = []
    for matrix in sign_alternatives(operator.matrix, solution.vectors):
        other = _with_matrix(operator, _signed(matrix))
        limit = max(SAME_MISFIT * rms_mev, SAME_RESIDUAL_MEV)
        if residuals_mev(model, other)[0] <= limit:
            found.append(other)
    return tuple(found)


def _refused(reason: str, centre: FloatArray, checked: bool) -> InferredInversion:
    return InferredInversion(
        "refused", reason, centre, None, (), None, None, None, None, None, None, False, None, 0,
        checked,
    )  # fmt: skip
