"""Everywhere that a gap may close: boxes that no bound settles, and what lies in them.

Branch and bound (`spectrum.proof.search`) is asked for a bound of `TARGET_EV` in every box. Where
the gap closes no bound can be had, and boxes are left open there; outside of them the gap is
*proved* to exceed the bound. Touching open boxes form a cluster. In each cluster the gap is
followed downhill from several boxes. A closing that is not in a cluster does not exist.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import sparse
from scipy.sparse.csgraph import connected_components

from topovet.arrays import BoolArray, FloatArray, IntArray
from topovet.spectrum.descent import FINE_MULTIPLET, Objective, descend
from topovet.spectrum.eigen import eigenvalues
from topovet.spectrum.gap import GAPLESS_EV
from topovet.spectrum.proof.boxes import Boxes, joined
from topovet.spectrum.proof.expansion import Expansion, expand
from topovet.spectrum.proof.prove import ELSEWHERE_EV, SYMMETRY_SHARE, ProvenHamiltonian
from topovet.spectrum.proof.search import Found, search
from topovet.spectrum.proof.symmetry_use import affordable_images
from topovet.spectrum.proof.zone import Region, choose_region

TARGET_EV = ELSEWHERE_EV
"""Bound that is asked for outside the open boxes."""

COARSE_FRAC, FINE_FRAC, FINEST_FRAC = 1 / 64, 2e-3, 5e-4
"""Reach in fractional k at which boxes are left open: at first, in small clusters, and in those
whose gap is wide enough for a bound at every centre. Boxes along a line are as many as it is long,
and finer ones would not say more about it."""

FEW_BOXES = 600
"""Clusters of more boxes than this stay coarse."""

SOLVES_PER_BOX = 64
"""Eigenvalue problems that a box may cost in a refinement; what is left then stays open."""

MOST_OPEN = 12_000
"""More boxes left open than this are no list of closings; it counts as a budget that ended."""

STARTS = 12
"""Boxes of a cluster from which the gap is followed downhill, by its size: one in three, at least
this many where there are as many, and at most ten times as many."""

N_GENERIC = 24
"""Random k that are tried first: bands that touch at all of them are degenerate throughout."""

ROUNDS = 60


@dataclass(frozen=True, slots=True, eq=False)
class Cluster:
    """Open boxes that touch each other.

    Attributes
    ----------
    k_frac
        (n, 3) centres of the boxes.
    reach_frac
        (n,) distance from the centre to a corner, in fractional k.
    lowest_ev, lowest_k
        Smallest gap to which a descent from its boxes led, eV, and where.
    """

    k_frac: FloatArray
    reach_frac: FloatArray
    lowest_ev: float
    lowest_k: FloatArray


@dataclass(frozen=True, slots=True, eq=False)
class ClosingSearch:
    """What is left of the zone when every box with a bound is taken away.

    Attributes
    ----------
    clusters
        In the irreducible part of the zone that the symmetries leave.
    touching_k, touching_ev
        (n, 3) and (n,): points with a gap below `GAPLESS_EV` to which descents led, not yet made
        distinct.
    images
        (g, 3, 3) integers, k' = k @ image: symmetries that were used.
    elsewhere_ev
        The gap is nowhere below this outside the clusters and their images: proved.
    exhausted
        Whether the budget ended first: clusters are then mere leftovers.
    degenerate
        The two bands touch at every generic k that was tried; nothing else was done.
    n_solves
        Eigenvalue problems.
    """

    clusters: tuple[Cluster, ...]
    touching_k: FloatArray
    touching_ev: FloatArray
    images: IntArray
    elsewhere_ev: float
    exhausted: bool
    degenerate: bool
    n_solves: int


def search_closings(
    hamiltonian: ProvenHamiltonian, filling: int, known_k: FloatArray, *, max_solves: int
) -> ClosingSearch:
    """All closings of E[N] - E[N-1], or boxes in which they must be.

    Parameters
    ----------
    hamiltonian, filling
        As for `topovet.spectrum.proof.prove.prove_direct_gap`.
    known_k
        (n, 3) fractional: where small gaps are known.
    max_solves
        Budget of eigenvalue problems.
    """
    images = affordable_images(hamiltonian.images, SYMMETRY_SHARE * TARGET_EV / 2)
    if _touch_throughout(hamiltonian, filling):
        empty = np.zeros((0, 3))
        return ClosingSearch((), empty, empty[:, 0], images.matrices, 0.0, False, True, N_GENERIC)
    crystal, cost = hamiltonian.crystal, 2 * images.worst_ev
    region = choose_region(images.matrices, crystal.reciprocal, crystal.periodic)
    expansion = expand(hamiltonian.model, hamiltonian.bloch, region.origin, region.axes)
    coarse = _leave_open(expansion, region, filling, cost, COARSE_FRAC, max_solves, None)
    exhausted, spent, left = coarse.exhausted, coarse.n_solves, coarse.open
    settled_ev = float(coarse.settled.lower.min(initial=np.inf))
    refinements = ((FINE_FRAC, _in_small_clusters), (FINEST_FRAC, _with_wide_gap))
    for smallest, chosen in refinements:
        if exhausted or not len(left):
            break
        picked = chosen(hamiltonian, filling, region, left)
        again, stay = left.only(picked), left.only(~picked)
        allowed = min(max_solves - spent, SOLVES_PER_BOX * len(again))
        fine = _leave_open(expansion, region, filling, cost, smallest, allowed, again)
        spent += fine.n_solves
        settled_ev = min(settled_ev, float(fine.settled.lower.min(initial=np.inf)))
        left = joined([stay, fine.open])
        exhausted = spent >= max_solves
    if len(left) > MOST_OPEN:
        exhausted, left = True, left.only(np.argsort(left.lower, kind="stable")[:FEW_BOXES])
    clusters, k_frac, gaps, used = _followed(hamiltonian, filling, region, left, known_k)
    met = gaps < GAPLESS_EV
    return ClosingSearch(
        clusters=clusters,
        touching_k=k_frac[met],
        touching_ev=gaps[met],
        images=images.matrices,
        elsewhere_ev=max(settled_ev - cost, 0.0) if np.isfinite(settled_ev) else 0.0,
        exhausted=exhausted,
        degenerate=False,
        n_solves=spent + used,
    )


def _touch_throughout(hamiltonian: ProvenHamiltonian, filling: int) -> bool:
    k_frac = np.random.default_rng(0).random((N_GENERIC, 3)) * np.array(
        hamiltonian.crystal.periodic
    )
    energies = eigenvalues(hamiltonian.bloch, k_frac)
    return bool(np.all(energies[:, filling] - energies[:, filling - 1] < GAPLESS_EV))


def _leave_open(
    expansion: Expansion,
    region: Region,
    filling: int,
    cost_ev: float,
    smallest_frac: float,
    max_solves: int,
    start: Boxes | None,
) -> Found:
    """Boxes without a bound of the size asked for, down to a size."""
    return search(
        expansion,
        region,
        Objective(filling, 1.0, -1.0),
        attained=(0.0, np.zeros(3)),
        target=lambda _: TARGET_EV + cost_ev,
        worth_while=lambda _: True,
        smallest_frac=lambda _: smallest_frac,
        improve=lambda k: (np.inf, k, 0),
        max_solves=max_solves,
        start=start,
    )


def _in_small_clusters(
    hamiltonian: ProvenHamiltonian, filling: int, region: Region, boxes: Boxes
) -> BoolArray:
    labels = _touching(boxes)
    return np.asarray(np.bincount(labels)[labels] <= FEW_BOXES)


def _with_wide_gap(
    hamiltonian: ProvenHamiltonian, filling: int, region: Region, boxes: Boxes
) -> BoolArray:
    """Clusters with a gap clearly above the bound at all centres: smaller boxes should have it."""
    energies = eigenvalues(hamiltonian.bloch, region.origin + boxes.centres @ region.axes)
    labels = _touching(boxes)
    least = np.full(labels.max() + 1, np.inf)
    np.minimum.at(least, labels, energies[:, filling] - energies[:, filling - 1])
    return np.asarray(least[labels] > 1.5 * TARGET_EV)


def _touching(boxes: Boxes) -> IntArray:
    """(n,) number of the cluster of each box; boxes with a common point belong together."""
    low = boxes.centres - boxes.half_widths
    high = boxes.centres + boxes.half_widths
    rows, columns = [], []
    for first in range(0, len(boxes), 512):
        part = slice(first, first + 512)
        meet = np.all(
            (low[part, None] <= high[None]) & (low[None] <= high[part, None]), axis=2
        )  # dyadic numbers: common faces are equal to the last bit
        i, j = np.nonzero(meet)
        rows.append(i + first)
        columns.append(j)
    row, column = np.concatenate(rows), np.concatenate(columns)
    graph = sparse.coo_array((np.ones(len(row)), (row, column)), shape=(len(boxes),) * 2)
    _, labels = connected_components(graph, directed=False)
    return np.asarray(labels, dtype=np.int64)


def _followed(
    hamiltonian: ProvenHamiltonian,
    filling: int,
    region: Region,
    boxes: Boxes,
    known_k: FloatArray,
) -> tuple[tuple[Cluster, ...], FloatArray, FloatArray, int]:
    """Clusters, and where the gap leads downhill from some of their boxes and from known points."""
    labels = _touching(boxes) if len(boxes) else np.zeros(0, dtype=np.int64)
    centres = region.origin + boxes.centres @ region.axes
    reach = np.linalg.norm(boxes.half_widths @ np.abs(region.axes), axis=1)
    members = [np.flatnonzero(labels == c) for c in range(labels.max(initial=-1) + 1)]
    chosen = [
        m[np.unique(np.linspace(0, len(m) - 1, _n_starts(len(m))).astype(int))] for m in members
    ]
    origin = np.concatenate([np.full(len(c), i) for i, c in enumerate(chosen)] or [np.zeros(0)])
    starts = np.concatenate([*(centres[c] for c in chosen), np.atleast_2d(known_k)])
    k_frac, gaps, n_solves = follow_down(hamiltonian, filling, starts)
    clusters = []
    for i, m in enumerate(members):
        own = np.flatnonzero(origin == i)
        best = own[gaps[own].argmin()]
        clusters.append(Cluster(centres[m], reach[m], float(gaps[best]), k_frac[best]))
    return tuple(clusters), k_frac, gaps, n_solves


def _n_starts(n_boxes: int) -> int:
    return min(n_boxes, max(STARTS, min(n_boxes // 3, 10 * STARTS)))


def follow_down(
    hamiltonian: ProvenHamiltonian, filling: int, starts: FloatArray
) -> tuple[FloatArray, FloatArray, int]:
    """Local minima of the direct gap: k (n, 3), eV (n,), and the solves spent."""
    objective = Objective(filling, 1.0, -1.0)
    coarse = descend(hamiltonian.bloch, objective, starts, max_rounds=ROUNDS)
    fine = descend(
        hamiltonian.bloch,
        objective,
        coarse.k_frac,
        max_rounds=ROUNDS,
        multiplet=FINE_MULTIPLET,
    )
    return fine.k_frac, fine.values, coarse.n_solves + fine.n_solves
