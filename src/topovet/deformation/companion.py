"""A spinless companion: the same compound without spin-orbit coupling, as a run of its own.

Beside it the scale of the coupling is turned along H0 x 1 + s (H - H0 x 1): the case itself at
s = 1, two copies of the companion at s = 0. Unlike the spin-dependent part of H this also takes
away what the coupling does to spin-independent elements and to the Wannier functions. It means
something only where both are written in the same functions, which `comparison` decides, and only
where the companion has the symmetries that the search rests on.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import largest_spectral_norm
from topovet.deformation.comparison import (
    EndMember,
    NotComparableError,
    compare_ends,
    on_one_list,
    with_spin,
)
from topovet.deformation.results import Comparison
from topovet.model.fourier import BlochSum, added_sum, build_bloch_sum
from topovet.model.spin_parts import Frame, spin_orbit_sum
from topovet.notation import mev
from topovet.symmetry.inversion import inversion_residual
from topovet.symmetry.time_reversal import sampled_k
from topovet.symmetry.trim import trim_points
from topovet.units import MEV_PER_EV

MOST_STRETCH = 1.01
"""Largest stretch of the cell, or its inverse, that is still the same structure: relaxed with and
without the coupling, lattice constants differ by less (practice)."""

MOST_DISPLACEMENT_ANG = 0.1
"""Largest move of a site within the cell, likewise."""


@dataclass(frozen=True, slots=True)
class CompanionTest:
    """Whether a spinless companion fits its case, and how far it is from the built-in part.

    Attributes
    ----------
    name
        Its Hamiltonian file, with its folder.
    fits
        Whether the scale of spin-orbit coupling can be turned towards it.
    reason
        Why not, one clause; "" where it fits.
    least_overlap
        Smallest overlap of the hoppings of one function; None where it was not asked for.
    difference_mev
        Spectral norm of the difference between the companion and the case without its
        spin-dependent part, the rigid shift taken off; largest over the sampled k.
    offset_mev
        That shift: the zero of energy of the companion against that of the case.
    inversion_mev
        How far the companion breaks inversion at the TRIM; None where the case has none.
    """

    name: str
    fits: bool
    reason: str = ""
    least_overlap: float | None = None
    difference_mev: float | None = None
    offset_mev: float | None = None
    inversion_mev: float | None = None


def compare_companion(
    case: EndMember, companion: EndMember, frame: Frame, *, smallest_gap_ev: float | None
) -> CompanionTest:
    """Compare a companion with its case.

    Parameters
    ----------
    case
        Spinful; its inversion is the operator that the parities rest on.
    companion
        As its files give it.
    frame
        Of the case's spinors, from `spin_frame`.
    smallest_gap_ev
        Direct gap of the case, eV; a companion that breaks inversion by as much is refused.
    """
    test = CompanionTest(companion.name, fits=False)
    if companion.model.spinful:
        return replace(
            test,
            reason=f"{companion.name} is spinful; name a run with spinors = .false. and without "
            "spin-orbit coupling",
        )
    if not companion.time_reversal:
        return replace(
            test,
            reason=f"{companion.name} breaks time reversal (spinless: H(R) is not real); name a "
            "run without magnetism",
        )
    try:
        pair = compare_ends(case, told_in_spinors_of(case, companion, frame))
    except NotComparableError as error:
        return replace(test, reason=str(error).rstrip("."))
    unlike = _unlike(pair.comparison, companion.name)
    if unlike:
        return replace(test, reason=unlike)
    test = replace(test, fits=True, least_overlap=_known(pair.comparison.least_overlap))
    coupling = coupling_between(case, companion, frame)
    test = _measured(test, case, coupling, frame)
    return _with_inversion(test, case, coupling, smallest_gap_ev)


def _unlike(comparison: Comparison, name: str) -> str:
    """What makes the companion another compound or structure; "" where nothing does."""
    if comparison.substitutions:
        changed = ", ".join(comparison.substitutions)
        return f"{name} has other elements ({changed}); name a run of the same compound"
    stretch = max(max(s, 1 / s) for s in comparison.stretches)
    moved = comparison.displacement_ang or 0.0
    if stretch <= MOST_STRETCH and moved <= MOST_DISPLACEMENT_ANG:
        return ""
    return (
        f"{name} has another structure (cell stretched by a factor {stretch:.3f}, sites moved by "
        f"up to {moved:.2f} angstrom); name a run with the same structure"
    )


def _known(overlap: float) -> float | None:
    return overlap if np.isfinite(overlap) else None


def told_in_spinors_of(case: EndMember, companion: EndMember, frame: Frame) -> EndMember:
    """The companion for both spins, in the spinors of the case; as it is where it cannot fit."""
    twice = with_spin(companion)
    if twice.model.n_orb != case.model.n_orb or twice.filling != case.filling:
        return companion
    model, basis = twice.model, twice.basis
    if frame is not None:
        model = replace(model, h_r=np.asarray(frame.conj().T @ model.h_r @ frame))
    if basis is not None and case.basis is not None:
        basis = replace(basis, spinors=case.basis.spinors)
    return replace(twice, model=model, basis=basis)


def coupling_between(case: EndMember, companion: EndMember, frame: Frame) -> BlochSum:
    """V(k) = H(k) - H0(k) x 1 in eV, for a pair that fits."""
    a, b = on_one_list(case, told_in_spinors_of(case, companion, frame))
    return build_bloch_sum(replace(a.model, h_r=a.model.h_r - b.model.h_r))


def _measured(
    test: CompanionTest, case: EndMember, coupling: BlochSum, frame: Frame
) -> CompanionTest:
    """How far the coupling is from the spin-dependent part of H."""
    built_in = spin_orbit_sum(build_bloch_sum(case.model), frame)
    apart = added_sum(coupling, built_in, -1.0)
    home = ~apart.r_half.any(axis=1)
    offset = float(np.trace(apart.rows()[0][home].sum(axis=0)).real) / apart.n_orb
    difference = apart.at(sampled_k(case.crystal.periodic)) - offset * np.eye(apart.n_orb)
    return replace(
        test,
        difference_mev=MEV_PER_EV * largest_spectral_norm(difference),
        offset_mev=-MEV_PER_EV * offset,
    )


def _with_inversion(
    test: CompanionTest, case: EndMember, coupling: BlochSum, smallest_gap_ev: float | None
) -> CompanionTest:
    """Where parities speak for the case, the companion must have its inversion too."""
    if case.inversion is None:
        return test
    without = added_sum(build_bloch_sum(case.model), coupling, -1.0)
    trim = trim_points(case.crystal.periodic)
    broken_ev = largest_spectral_norm(inversion_residual(without, case.inversion, trim))
    test = replace(test, inversion_mev=MEV_PER_EV * broken_ev)
    if smallest_gap_ev is None or broken_ev < smallest_gap_ev:
        return test
    gap, broken = mev(MEV_PER_EV * smallest_gap_ev), mev(MEV_PER_EV * broken_ev)
    return replace(
        test,
        fits=False,
        reason=f"{test.name} breaks the inversion of the case by {broken} at the TRIM, as much as "
        f"the direct gap of {gap}; make both with the same structure, origin and projections",
    )
