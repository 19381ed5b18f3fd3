"""The gap at a filling, proved: a lower bound that holds at every k beside the value attained."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.model.hamiltonian import TightBindingModel
from topovet.spectrum.descent import FINE_MULTIPLET, Objective, descend
from topovet.spectrum.proof.expansion import expand, fit_positions, rounding_bound
from topovet.spectrum.proof.results import Certificate, GapProof, IndirectGapProof
from topovet.spectrum.proof.search import Found, search
from topovet.spectrum.proof.symmetry_use import Images, affordable_images
from topovet.spectrum.proof.zone import Region, choose_region

TOLERANCE = 0.02
"""Proved and attained gap are asked to be within this part of each other."""

SYMMETRY_SHARE = 0.95
"""Largest part of the tolerance that residuals of symmetries may use up. What little is left costs
boxes only around the minima, and a group of 48 saves far more everywhere else."""

CLOSED_EV = 1e-6
"""Gaps attained below this count as closings: nothing is to be proved there."""

ELSEWHERE_EV = 1e-3
"""Beside a closing the gap is asked to be this large outside the open boxes."""

SMALLEST_FRAC = 1e-8
"""Boxes of this reach, in fractional k, are left open for a search of nodes."""

SMALLEST_BESIDE_CLOSING = 2e-3
"""The same beside a closing, where the boxes around it can only shrink."""

DESCENT_ROUNDS = 30


@dataclass(frozen=True, slots=True)
class _Goal:
    """What is to be shown.

    Attributes
    ----------
    quantity, filling
        See `GapProof`.
    relative, absolute_ev
        Tolerance: part of the value attained, and eV.
    """

    quantity: str
    filling: int
    relative: float
    absolute_ev: float

    @property
    def objective(self) -> Objective:
        weights = {"direct": (1.0, -1.0), "conduction": (1.0, 0.0), "valence": (0.0, -1.0)}
        return Objective(self.filling, *weights[self.quantity])

    @property
    def n_levels(self) -> int:
        return 2 if self.quantity == "direct" else 1

    def closed(self, value: float) -> bool:
        return self.quantity == "direct" and value < CLOSED_EV

    def tolerance_ev(self, value: float) -> float:
        return self.relative * value + self.absolute_ev

    def allowance_ev(self, value: float) -> float:
        """Largest residual of a symmetry that may be used."""
        share = ELSEWHERE_EV if self.closed(value) else self.tolerance_ev(value)
        return SYMMETRY_SHARE * share / self.n_levels

    def affords(self, value: float, cost_ev: float) -> bool:
        """Whether symmetries of this cost leave something to be shown."""
        return self.closed(value) or cost_ev < self.tolerance_ev(value)

    def target(self, value: float) -> float:
        """Bound asked for, without the cost of symmetries."""
        return ELSEWHERE_EV if self.closed(value) else value - self.tolerance_ev(value)

    def smallest_frac(self, value: float) -> float:
        return SMALLEST_BESIDE_CLOSING if self.closed(value) else SMALLEST_FRAC


@dataclass(frozen=True, slots=True, eq=False)
class ProvenHamiltonian:
    """What a proof is about.

    Attributes
    ----------
    model, bloch
        The same Hamiltonian in real space and as a Fourier sum.
    crystal
        Gives reciprocal lattice and periodic directions.
    images
        Symmetries on offer, each with its residual (`proof.symmetry_use`).
    """

    model: TightBindingModel
    bloch: BlochSum
    crystal: Crystal
    images: Images


def prove_direct_gap(
    hamiltonian: ProvenHamiltonian,
    filling: int,
    *,
    attained_k: FloatArray,
    tolerance: float = TOLERANCE,
    max_solves: int,
) -> tuple[GapProof, Certificate]:
    """Lower bound of E[N] - E[N-1] over the whole zone, N any number of bands.

    Parameters
    ----------
    hamiltonian
        See `ProvenHamiltonian`.
    filling
        N, 0 < N < n_orb; that of the electrons or any other pair of neighbouring bands.
    attained_k
        (3,) or (n, 3) fractional: where small gaps are known; any point will do, a good one saves
        solves.
    tolerance
        Relative distance of proved and attained gap that is asked for.
    max_solves
        Budget of eigenvalue problems; the last batch may exceed it.

    Raises
    ------
    ValueError
        No such pair of bands, or no tolerance.
    """
    goal = _Goal("direct", filling, tolerance, 0.0)
    return _prove(hamiltonian, goal, np.atleast_2d(attained_k), max_solves)


def prove_indirect_gap(
    hamiltonian: ProvenHamiltonian,
    filling: int,
    *,
    valence_k: FloatArray,
    conduction_k: FloatArray,
    tolerance_ev: float,
    max_solves: int,
) -> tuple[IndirectGapProof, tuple[Certificate, Certificate]]:
    """Lower bound of min E[N] - max E[N-1], each edge proved by itself to half the tolerance.

    Parameters
    ----------
    hamiltonian, filling, max_solves
        As for `prove_direct_gap`; half of the budget for each edge.
    valence_k, conduction_k
        (3,) where the edges are believed to be.
    tolerance_ev
        Distance of proved and attained gap that is asked for, eV: an indirect gap can be zero.

    Raises
    ------
    ValueError
        As `prove_direct_gap`.
    """
    proofs, certificates = [], []
    for quantity, start in (("valence", valence_k), ("conduction", conduction_k)):
        goal = _Goal(quantity, filling, 0.0, tolerance_ev / 2)
        proof, certificate = _prove(hamiltonian, goal, np.atleast_2d(start), max_solves // 2)
        proofs.append(proof)
        certificates.append(certificate)
    valence, conduction = proofs
    return IndirectGapProof(
        proved_min_ev=valence.proved_min_ev + conduction.proved_min_ev,
        attained_ev=valence.attained_ev + conduction.attained_ev,
        valence=valence,
        conduction=conduction,
        status=next((p.status for p in proofs if p.status != "proved"), "proved"),
    ), (certificates[0], certificates[1])


def _prove(
    hamiltonian: ProvenHamiltonian, goal: _Goal, start: FloatArray, max_solves: int
) -> tuple[GapProof, Certificate]:
    """Search with the symmetries that the value attained can pay for; again if it fell too far."""
    if not 0 < goal.filling < hamiltonian.model.n_orb:
        raise ValueError(f"no gap above band {goal.filling} of {hamiltonian.model.n_orb}")
    if goal.relative + goal.absolute_ev <= 0:
        raise ValueError("a proof without tolerance never ends")
    value, k_frac, spent = _lowest(hamiltonian, goal.objective, start)
    while True:
        images = affordable_images(hamiltonian.images, goal.allowance_ev(value))
        cost = goal.n_levels * images.worst_ev
        allowed = max(1, max_solves - spent)  # one batch at least: its bounds hold
        found, region = _search(hamiltonian, goal, images, (value, k_frac), allowed)
        spent += found.n_solves
        value, k_frac = found.attained_ev, found.k_frac
        if goal.affords(value, cost) or spent >= max_solves:
            break
    rounding = rounding_bound(hamiltonian.model)
    proof = _conclude(goal, found, images, spent, rounding)
    return proof, _certificate(goal, found, region, images, fit_positions(hamiltonian.model))


def _search(
    hamiltonian: ProvenHamiltonian,
    goal: _Goal,
    images: Images,
    attained: tuple[float, FloatArray],
    max_solves: int,
) -> tuple[Found, Region]:
    crystal, cost = hamiltonian.crystal, goal.n_levels * images.worst_ev
    region = choose_region(images.matrices, crystal.reciprocal, crystal.periodic)
    found = search(
        expand(hamiltonian.model, hamiltonian.bloch, region.origin, region.axes),
        region,
        goal.objective,
        attained=attained,
        target=lambda value: goal.target(value) + cost,
        worth_while=lambda value: goal.affords(value, cost),
        smallest_frac=goal.smallest_frac,
        improve=lambda k: _lowest(hamiltonian, goal.objective, k[None]),
        max_solves=max_solves,
    )
    return found, region


def _lowest(
    hamiltonian: ProvenHamiltonian, objective: Objective, start: FloatArray
) -> tuple[float, FloatArray, int]:
    """Value, k and solves of the lowest point below the given ones."""
    coarse = descend(hamiltonian.bloch, objective, start, max_rounds=DESCENT_ROUNDS)
    fine = descend(
        hamiltonian.bloch,
        objective,
        coarse.k_frac,
        max_rounds=DESCENT_ROUNDS,
        multiplet=FINE_MULTIPLET,
    )
    best = int(fine.values.argmin())
    return float(fine.values[best]), fine.k_frac[best], coarse.n_solves + fine.n_solves


def _conclude(
    goal: _Goal, found: Found, images: Images, n_solves: int, rounding_ev: float
) -> GapProof:
    cost = goal.n_levels * images.worst_ev
    floor = 0.0 if goal.quantity == "direct" else -np.inf
    settled = float(found.settled.lower.min(initial=np.inf)) - cost
    proved = min(settled, float(found.open.lower.min(initial=np.inf)) - cost, found.attained_ev)
    elsewhere = settled if len(found.settled) else proved
    x, y, z = (float(c) for c in found.k_frac - np.round(found.k_frac))
    status, reason = _status(goal, found)
    return GapProof(
        quantity=goal.quantity,
        filling=goal.filling,
        proved_min_ev=max(proved, floor),
        attained_ev=found.attained_ev,
        k_frac=(x, y, z),
        status=status,
        reason=reason,
        tolerance_ev=goal.tolerance_ev(found.attained_ev),
        elsewhere_ev=max(elsewhere, floor),
        n_boxes=len(found.settled),
        n_open=len(found.open),
        n_solves=n_solves,
        n_operations=len(images.matrices),
        symmetry_residual_ev=images.worst_ev,
        symmetry_cost_ev=cost,
        rounding_ev=rounding_ev,
    )


def _status(goal: _Goal, found: Found) -> tuple[str, str]:
    if goal.closed(found.attained_ev):
        return "closing suspected", (
            f"the gap attained is {found.attained_ev:.1e} eV, which counts as closed"
        )
    if found.exhausted:
        return "budget ended", f"{len(found.open)} boxes were left when the budget was spent"
    if len(found.open):
        return "closing suspected", (
            f"{len(found.open)} boxes shrank to nothing without a bound of the size asked for"
        )
    return "proved", ""


def _certificate(
    goal: _Goal, found: Found, region: Region, images: Images, positions: FloatArray
) -> Certificate:
    return Certificate(
        quantity=goal.quantity,
        filling=goal.filling,
        claim_ev=float(found.settled.lower.min(initial=np.inf)),
        origin=region.origin,
        axes=region.axes,
        images=images.matrices,
        residuals_ev=images.residuals_ev,
        seed=region.seed,
        metric=region.metric,
        sites=region.sites,
        positions=positions,
        levels=found.settled.levels,
        indices=found.settled.indices,
        lower_ev=found.settled.lower,
        open_levels=found.open.levels,
        open_indices=found.open.indices,
        open_lower_ev=found.open.lower,
    )
