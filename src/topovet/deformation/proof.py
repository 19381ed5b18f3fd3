"""The gap between two Hamiltonians, proved open over a range of lambda and at every k.

lambda is one more coordinate. In the gauge of `spectrum.proof.expansion`, with the same positions
for both ends, H~(dk, dl) = A~(dk) + (l0 + dl) D~(dk) with D = H_B - H_A, hence

    H~_a = A_a + l0 D_a,   H~_l = D,   H~_ab = A_ab + l0 D_ab,   H~_al = D_a,   H~_ll = 0,

and what these leave out is the third order of H(l0) in dk and, with it, dl times the second order
of D in dk. Element by element, t <= T as there, |exp(i t) - 1 - i t| <= min(t^2/2, 2 t), so that

    rho = sum_R |H(l0, R)| min(T^3/6, T^2) + h_l sum_R |D(R)| min(T^2/2, 2 T),

|H(l0, R)| being at most the larger of its moduli at the two ends of the range (it is convex). The
bound of a box is then that of `block_bound`, with one axis more.

Symmetries reduce the zone only: they act on k at fixed lambda. One and the same operator is
measured on both ends, and its residual at lambda is at most the larger of the two, the norm being
convex.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from topovet.arrays import BoolArray, ComplexArray, FloatArray, IntArray
from topovet.deformation.gap_curve import GapCurve
from topovet.deformation.path import Path, with_lambda
from topovet.deformation.results import ProvedStretch
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel
from topovet.spectrum.descent import descend
from topovet.spectrum.gap import GAPLESS_EV
from topovet.spectrum.proof.boxes import Boxes, joined, split, whole
from topovet.spectrum.proof.expansion import (
    NORM_MARGIN,
    R_AT_A_TIME,
    Expansion,
    expand,
    fit_positions,
)
from topovet.spectrum.proof.search import BATCH, DEEPEST, Remainders, bound_batch
from topovet.spectrum.proof.symmetry_use import (
    Images,
    affordable_images,
    residual_everywhere,
    time_reversal_residual,
)
from topovet.spectrum.proof.zone import Region, choose_region
from topovet.symmetry.operators import WannierOperator

SHARE = 0.4
"""Part of the gap attained at a lambda that is asked to be proved: the question is whether the gap
stays open, and a tighter bound would cost many times the boxes."""

SYMMETRY_SHARE = 0.1
"""Largest part of the smallest gap attained that residuals of symmetries may use up."""

MISSED = 0.9
"""A gap below this part of the curve is one that the curve has missed."""

BINS = 16
"""Bounds are reported for so many parts of a range; a power of two, as boxes are halved."""

DESCENT_ROUNDS = 30


@dataclass(frozen=True, slots=True, eq=False)
class _PathExpansion:
    """(k, lambda) in coordinates u in [0, 1]^(d + 1), lambda last; see `SecondOrder`."""

    start: Expansion
    change: Expansion
    lo: float
    width: float
    largest: FloatArray
    rounding_ev: float

    @property
    def n_orb(self) -> int:
        return self.start.n_orb

    @property
    def n_axes(self) -> int:
        return self.start.n_axes + 1

    def derivatives(self, u: FloatArray) -> tuple[ComplexArray, ComplexArray, ComplexArray]:
        in_k = u[:, :-1]
        lam = (self.lo + self.width * u[:, -1])[:, None, None]
        h, first, second = self.start.derivatives(in_k)
        d, d_first, d_second = self.change.derivatives(in_k)
        by_lambda = self.width * d[:, None]
        return (
            h + lam * d,
            np.concatenate([first + lam[:, None] * d_first, by_lambda], axis=1),
            with_lambda(second + lam[:, None] * d_second, self.width * d_first),
        )

    def remainder_ev(self, half_widths: FloatArray) -> float:
        """Bound of what second order in (k, lambda) leaves out in a box of these half-widths."""
        offsets, reach = self.start.offsets, self.start.reach
        by_lambda = self.width * float(half_widths[-1])
        rho = np.zeros(offsets.shape[1:])
        for begin in range(0, len(reach), R_AT_A_TIME):
            part = slice(begin, begin + R_AT_A_TIME)
            t = np.zeros((len(reach[part]), *rho.shape))
            for axis, width in enumerate(half_widths[:-1]):
                t += 2 * np.pi * width * np.abs(reach[part, axis, None, None] + offsets[axis])
            third = self.largest[part] * np.minimum(t**3 / 6, t**2)
            change = np.abs(self.change.model.h_r[part]) * np.minimum(t**2 / 2, 2 * t)
            rho += (third + by_lambda * change).sum(axis=0)
        return NORM_MARGIN * float(np.linalg.norm(rho, ord=2))


class ClosingMetError(Exception):
    """A gap that counts as closed was met where none was known; the curve has it now."""


@dataclass(frozen=True, slots=True, eq=False)
class Prover:
    """Proves the gap along one path, asking in each box for a part of what the curve has there.

    Attributes
    ----------
    curve
        The path, and the smallest gaps met on it; values met here that fall below it are added.
    crystal
        Its reciprocal lattice and periodic directions choose the region of k.
    images
        Symmetries that both ends have (`images_of_path`).
    """

    curve: GapCurve
    crystal: Crystal
    images: Images
    _regions: dict[bytes, Region] = field(default_factory=dict)

    def prove(self, lo: float, hi: float, *, max_solves: int) -> tuple[list[ProvedStretch], int]:
        """Lower bounds of the direct gap over the zone, for lambda from lo to hi.

        Parameters
        ----------
        lo, hi
            A range in which no closing is known.
        max_solves
            Budget of eigenvalue problems; the last batch may exceed it.

        Returns
        -------
        list, int
            Bounds over `BINS` equal parts of the range, and the solves spent. A part in which a box
            was left open has the bound 0.

        Raises
        ------
        ClosingMetError
            The gap closes in the range.
        """
        lowest = self.curve.lowest_in(lo, hi).gap_ev
        usable = affordable_images(self.images, SYMMETRY_SHARE * lowest / 2)
        cost = 2 * usable.worst_ev
        in_k = self._region(usable)
        expansion = _expand_path(self.curve.path, in_k, lo, hi)
        region = _with_lambda_axis(in_k, lo, hi)
        remainders, objective = Remainders(expansion), self.curve.objective
        waiting, n_solves = whole(expansion.n_axes), 0
        settled, left = [waiting.only(np.zeros(1, dtype=bool))], list[Boxes]()
        while len(waiting) and n_solves < max_solves:
            order = np.argsort(waiting.lower, kind="stable")
            batch, waiting = waiting.only(order[:BATCH]), waiting.only(order[BATCH:])
            bounds = bound_batch(expansion, objective, batch, remainders)
            n_solves += len(batch)
            self._compare(bounds.values, region.origin + batch.centres @ region.axes)
            batch = Boxes(batch.levels, batch.indices, np.maximum(batch.lower, bounds.lower))
            wanted = SHARE * self.curve.floor(*_lambda_range(batch, lo, hi)) + cost
            done = batch.lower >= wanted
            settled.append(batch.only(done))
            open_ = batch.only(~done)
            deepest = open_.levels.max(axis=1, initial=0) >= DEEPEST
            left.append(open_.only(deepest))
            affordable = (bounds.values - wanted)[~done]
            parts = split(
                open_.only(~deepest), bounds.losses[~done][~deepest], affordable[~deepest]
            )
            waiting = joined([waiting, parts.only(region.may_hold(parts))])
        open_boxes = joined([*left, waiting])
        return self._bins(joined(settled), open_boxes, cost, lo, hi), n_solves

    def _compare(self, values: FloatArray, points: FloatArray) -> None:
        """Follow the lowest value downhill where it is well below what the curve has there."""
        floor = self.curve.floor(points[:, 3], points[:, 3])
        worst = int((values / floor).argmin())
        if values[worst] >= MISSED * floor[worst]:
            return
        lam = float(points[worst, 3])
        found = descend(
            self.curve.path.bloch_at(lam),
            self.curve.objective,
            points[worst, None, :3],
            max_rounds=DESCENT_ROUNDS,
        )
        self.curve.note(lam, float(found.values[0]), found.k_frac[0])
        if found.values[0] < GAPLESS_EV:
            raise ClosingMetError

    def _bins(
        self, settled: Boxes, left: Boxes, cost_ev: float, lo: float, hi: float
    ) -> list[ProvedStretch]:
        """What the boxes say together, by equal parts of the range."""
        edges = np.linspace(0.0, 1.0, BINS + 1)
        made = []
        for i in range(BINS):
            within = [_touches(boxes, edges[i], edges[i + 1]) for boxes in (settled, left)]
            low = float(settled.lower[within[0]].min(initial=np.inf)) - cost_ev
            proved = 0.0 if within[1].any() or not np.isfinite(low) else max(0.0, low)
            ends = (lo + (hi - lo) * float(edges[i]), lo + (hi - lo) * float(edges[i + 1]))
            attained = float(self.curve.floor(np.array([ends[0]]), np.array([ends[1]]))[0])
            made.append(ProvedStretch(*ends, min(proved, attained), attained))
        return made

    def _region(self, images: Images) -> Region:
        key = images.matrices.tobytes()
        if key not in self._regions:
            self._regions[key] = choose_region(
                images.matrices, self.crystal.reciprocal, self.crystal.periodic
            )
        return self._regions[key]


def _lambda_range(boxes: Boxes, lo: float, hi: float) -> tuple[FloatArray, FloatArray]:
    centres, half = boxes.centres[:, -1], boxes.half_widths[:, -1]
    return lo + (hi - lo) * (centres - half), lo + (hi - lo) * (centres + half)


def _touches(boxes: Boxes, low: float, high: float) -> BoolArray:
    """Which boxes share more than an edge with a part of the range of u."""
    centres, half = boxes.centres[:, -1], boxes.half_widths[:, -1]
    return np.asarray((centres - half < high) & (centres + half > low))


def images_of_path(
    path: Path, operators: Sequence[WannierOperator], *, time_reversal: bool
) -> Images:
    """What operations, time reversal and their products do to k, with residuals for every lambda.

    Parameters
    ----------
    path
        Both ends are measured with one and the same operator.
    operators
        Unitary operations, a group.
    time_reversal
        Whether time reversal and its products with them may be used.
    """
    identity = np.eye(3, dtype=np.int64)
    found = {identity.tobytes(): 0.0}

    def note(matrix: IntArray, residual: float) -> None:
        key = np.ascontiguousarray(matrix, dtype=np.int64).tobytes()
        found[key] = min(residual, found.get(key, np.inf))

    ends = (path.a, path.b)
    reversal = max(map(time_reversal_residual, ends)) if time_reversal else np.inf
    if time_reversal:
        note(-identity, reversal)
    for operator in operators:
        residual = max(residual_everywhere(model, operator) for model in ends)
        note(operator.k_rotation, residual)
        if time_reversal:
            note(-operator.k_rotation, residual + reversal)
    matrices = [np.frombuffer(key, dtype=np.int64).reshape(3, 3) for key in found]
    return Images(np.array(matrices), np.array(list(found.values())))


def _expand_path(path: Path, region: Region, lo: float, hi: float) -> _PathExpansion:
    change = TightBindingModel(path.a.r_cells, path.b.h_r - path.a.h_r, path.a.spinful)
    middle = path.model_at((lo + hi) / 2)
    positions = fit_positions(middle)
    start = expand(path.a, path.start, region.origin, region.axes, positions=positions)
    moved = expand(change, path.change, region.origin, region.axes, positions=positions)
    ends = [np.abs(path.model_at(lam).h_r) for lam in (lo, hi)]
    return _PathExpansion(
        start=start,
        change=moved,
        lo=lo,
        width=hi - lo,
        largest=np.maximum(*ends),
        rounding_ev=start.rounding_ev + moved.rounding_ev,
    )


def _with_lambda_axis(region: Region, lo: float, hi: float) -> Region:
    """The region times the range of lambda: points are (k, lambda), (4,)."""
    d = len(region.axes)
    axes = np.zeros((d + 1, 4))
    axes[:d, :3] = region.axes
    axes[d, 3] = hi - lo
    return Region(
        origin=np.append(region.origin, lo),
        axes=axes,
        normals=np.column_stack([region.normals, np.zeros(len(region.normals))]),
        offsets=region.offsets,
        images=region.images,
        seed=region.seed,
        metric=region.metric,
        sites=region.sites,
    )
