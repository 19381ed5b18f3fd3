"""What a proof of a gap says, and what it leaves behind to be checked."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.arrays import FloatArray, IntArray


@dataclass(frozen=True, slots=True)
class GapProof:
    """A lower bound that holds at every k, and the value that was attained.

    Attributes
    ----------
    quantity
        "direct" (E[N] - E[N-1]), "conduction" (E[N]) or "valence" (-E[N-1], so that its minimum is
        the valence-band maximum turned over).
    filling
        N, the number of bands below the gap.
    proved_min_ev
        The quantity is nowhere below this, eV; for the direct gap at least 0.
    attained_ev, k_frac
        Smallest value met, and where (fractional).
    status
        "proved": proved_min_ev >= attained_ev - tolerance_ev. "closing suspected": the gap attained
        is zero to `CLOSED_EV`, or boxes became tiny without a proof. "budget ended": too few
        solves; proved_min_ev still holds.
    reason
        One sentence where the status is not "proved"; empty otherwise.
    tolerance_ev
        Distance asked for between the two.
    elsewhere_ev
        The quantity is nowhere below this outside the open boxes, eV.
    n_boxes, n_open, n_solves
        Boxes that were settled, boxes left open, eigenvalue problems.
    n_operations
        Operations used to reduce the zone (images of k, identity counted).
    symmetry_residual_ev
        Largest residual of those used, eV; `symmetry_cost_ev` of it was taken off the bound.
    rounding_ev
        Rounding error allowed for in every bound.
    """

    quantity: str
    filling: int
    proved_min_ev: float
    attained_ev: float
    k_frac: tuple[float, float, float]
    status: str
    reason: str
    tolerance_ev: float
    elsewhere_ev: float
    n_boxes: int
    n_open: int
    n_solves: int
    n_operations: int
    symmetry_residual_ev: float
    symmetry_cost_ev: float
    rounding_ev: float


@dataclass(frozen=True, slots=True)
class IndirectGapProof:
    """The indirect gap min E[N] - max E[N-1], from a proof of each edge.

    Attributes
    ----------
    proved_min_ev, attained_ev
        The gap is at least the first and at most the second, eV; negative for a semimetal.
    valence, conduction
        The two proofs.
    status
        The worse of theirs.
    """

    proved_min_ev: float
    attained_ev: float
    valence: GapProof
    conduction: GapProof
    status: str


@dataclass(frozen=True, slots=True, eq=False)
class Certificate:
    """The boxes of a proof, to be checked again by `proof.recheck`.

    A box of level l and index i is [i 2^-l, (i + 1) 2^-l] along each axis of u, and
    k = origin + u @ axes. The boxes settled and those left open cover the part of the zone whose
    points are no farther from `seed` than from any other point of its orbit; every k has an image
    there.

    Attributes
    ----------
    quantity, filling
        As in `GapProof`.
    claim_ev
        Lower bound of the quantity in all settled boxes, before the symmetry's cost.
    origin, axes
        (3,) and (d, 3), fractional.
    images
        (g, 3, 3) integers, k' = k @ image; a group.
    residuals_ev
        (g,) how much each band can differ between k and its image.
    seed, metric
        (3,) fractional; (3, 3) invariant under the images.
    sites
        (p, 3) points of the orbit of the seed, modulo reciprocal lattice vectors, that were used.
    positions
        (n_orb, 3) fractional, the gauge of the expansions; any will do.
    levels, indices
        (n, d) integers of the settled boxes.
    lower_ev
        (n,) bound in each.
    open_levels, open_indices, open_lower_ev
        The same for boxes left open.
    """

    quantity: str
    filling: int
    claim_ev: float
    origin: FloatArray
    axes: FloatArray
    images: IntArray
    residuals_ev: FloatArray
    seed: FloatArray
    metric: FloatArray
    sites: FloatArray
    positions: FloatArray
    levels: IntArray
    indices: IntArray
    lower_ev: FloatArray
    open_levels: IntArray
    open_indices: IntArray
    open_lower_ev: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class ProvedGap:
    """A proof of the direct gap with its certificate."""

    proof: GapProof
    certificate: Certificate


@dataclass(frozen=True, slots=True, eq=False)
class ProvedIndirectGap:
    """A proof of the indirect gap with the certificates of both edges."""

    proof: IndirectGapProof
    valence: Certificate
    conduction: Certificate
