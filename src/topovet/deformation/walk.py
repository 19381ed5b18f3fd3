"""The whole way from A to B: where the gap closes, what is proved in between, what changes."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from topovet.deformation.comparison import ComparedPair, EndMember, compare_ends, on_one_list
from topovet.deformation.exact import with_exact_symmetries
from topovet.deformation.exchange import Sectors, find_exchanges, levels_along, split_by_parity
from topovet.deformation.gap_curve import GapCurve
from topovet.deformation.indices import compute_indices
from topovet.deformation.path import Path, build_path
from topovet.deformation.proof import ClosingMetError, Prover, images_of_path
from topovet.deformation.results import (
    Averaging,
    Closing,
    ParityExchange,
    ProvedStretch,
    Segment,
    SideIndices,
    TrimLevels,
    Walk,
)
from topovet.spectrum.gap import GAPLESS_EV, choose_mesh
from topovet.symmetry.operators import WannierOperator
from topovet.symmetry.results import InversionOperator

N_SURVEYED = {"quick": 9, "standard": 9, "thorough": 17}
"""Values of lambda that are searched from a mesh, by effort."""

MESH_EFFORT = {"quick": "quick", "standard": "quick", "thorough": "standard"}

RESOLUTION = {"standard": 1 / 256, "thorough": 1 / 2048}
"""Width of lambda that a proof leaves beside a closing, by effort; "quick" proves nothing."""

SOLVES_FOR_30 = {"standard": 30_000, "thorough": 300_000}
"""Eigenvalue problems of (k, lambda) boxes allowed for 30 orbitals."""

SHRINK = 8.0
"""Ranges that end at a closing are proved in pieces, each so many times nearer to it: far from it
more symmetries can be paid for."""

MOST_FACTOR = 8.0
"""Largest multiple of that budget, for small matrices."""

MOST_RESTARTS = 3

POINT_FACTOR = 4.0
"""A range in which the attained gap stays below `GAPLESS_EV` is a point where it is no wider than
so many times what the slope of the gap outside makes of that threshold."""

SLOPE_STEP = 1e-2

Observer = Callable[[str], None]


@dataclass(frozen=True, slots=True, eq=False)
class _Setting:
    """What all steps share."""

    pair: ComparedPair
    path: Path
    filling: int
    time_reversal: bool
    inversion: InversionOperator | None
    effort: str

    @property
    def periodic(self) -> tuple[bool, bool, bool]:
        return self.pair.a.crystal.periodic

    def indices(self, lam: float) -> SideIndices:
        return compute_indices(
            self.path,
            lam,
            self.filling,
            self.periodic,
            time_reversal=self.time_reversal,
            inversion=self.inversion,
            effort=self.effort,
        )


def walk(
    a: EndMember,
    b: EndMember,
    *,
    operators: Sequence[WannierOperator] = (),
    effort: str = "standard",
    observe: Observer = lambda text: None,
) -> Walk:
    """Mix two Hamiltonians, H(lambda) = (1 - lambda) H_A + lambda H_B, and follow the direct gap.

    Parameters
    ----------
    a, b
        The ends.
    operators
        Unitary operations of a group, in the functions that both ends share. Both are averaged over
        them, over inversion and over time reversal, as far as both have these. None is needed.
    effort
        "quick" proves nothing; "thorough" comes nearer to the closings.
    observe
        Hears what is being done.

    Raises
    ------
    NotComparableError
        The ends are not written in the same functions.
    """
    pair = compare_ends(a, b)
    inversion, why_not = _common_inversion(pair)
    both_reversed = pair.a.time_reversal and pair.b.time_reversal
    pair, averagings = _made_exact(pair, operators, inversion, both_reversed)
    path = build_path(pair)
    setting = _Setting(pair, path, pair.a.filling, both_reversed, inversion, effort)
    mesh = choose_mesh(pair.a.crystal, MESH_EFFORT[effort])
    even = both_reversed or inversion is not None
    curve = GapCurve(path, setting.filling, mesh, setting.periodic, even)
    observe("search the smallest gap along lambda")
    curve.survey(np.linspace(0.0, 1.0, N_SURVEYED[effort]))
    sectors: tuple[Sectors, ...] = ()
    if inversion is not None:
        sectors = split_by_parity(path, inversion, setting.filling, setting.periodic)
    exchanges = tuple(sorted((e for s in sectors for e in find_exchanges(s)), key=lambda e: e.lam))
    for exchange in exchanges:
        curve.add_starts(np.array([exchange.k]))
        curve.at(exchange.lam, again=True)
    closings = _find_closings(curve, exchanges)
    stretches: list[ProvedStretch] = []
    n_solves = 0
    if effort in RESOLUTION:
        observe("prove the gap between the closings")
        images = images_of_path(path, operators, time_reversal=both_reversed)
        prover = Prover(curve, pair.a.crystal, images)
        closings, stretches, n_solves = _prove(prover, closings, exchanges, effort)
    observe("count indices on each side")
    segments = _segments(setting, curve, closings, stretches)
    return Walk(
        comparison=pair.comparison,
        filling=setting.filling,
        samples=curve.samples(),
        closings=closings,
        exchanges=exchanges,
        exchange_note=why_not,
        stretches=tuple(stretches),
        n_solves=n_solves,
        proof_note=_proof_note(effort, stretches),
        resolution=RESOLUTION.get(effort, 1.0),
        segments=segments,
        levels=_levels(sectors, exchanges),
        time_reversal=both_reversed,
        inversion=inversion is not None,
        averagings=averagings,
        mesh=mesh,
        effort=effort,
    )


def _common_inversion(pair: ComparedPair) -> tuple[InversionOperator | None, str]:
    """Inversion that both ends have in one representation, or why there is none."""
    one, two = pair.a.inversion, pair.b.inversion
    for end, operator in ((pair.a, one), (pair.b, two)):
        if operator is None:
            return None, f"{end.name} has no inversion"
    assert one is not None
    assert two is not None
    same = (
        np.allclose(one.centre_frac, two.centre_frac, atol=1e-6)
        and np.allclose(one.matrix, two.matrix, atol=1e-6)
        and np.array_equal(one.shifts, two.shifts)
        and np.array_equal(one.homes, two.homes)
    )
    if not same:
        return None, (
            f"inversion acts differently on the functions of {pair.a.name} and {pair.b.name}: "
            "other sites or another centre"
        )
    return one, ""


def _made_exact(
    pair: ComparedPair,
    operators: Sequence[WannierOperator],
    inversion: InversionOperator | None,
    time_reversal: bool,
) -> tuple[ComparedPair, tuple[Averaging, Averaging]]:
    """Both ends with the symmetries they share exact, and what that moved."""
    (a, of_a), (b, of_b) = (
        with_exact_symmetries(end, operators, inversion, time_reversal=time_reversal)
        for end in (pair.a, pair.b)
    )
    a, b = on_one_list(a, b)
    return ComparedPair(a, b, pair.comparison), (of_a, of_b)


def _find_closings(curve: GapCurve, exchanges: tuple[ParityExchange, ...]) -> tuple[Closing, ...]:
    """Ranges of lambda in which the attained gap vanishes, and exchanges, in order."""
    closed = [sample.lam for sample in curve.closings()]
    ranges: list[tuple[float, float]] = []
    for lam in sorted({*closed, *(e.lam for e in exchanges)}):
        if ranges and lam <= ranges[-1][1]:
            continue
        if curve.at(lam).gap_ev < GAPLESS_EV:
            found = (curve.boundary(lam, 0.0), curve.boundary(lam, 1.0))
        else:
            found = (lam, lam)  # levels change places; what breaks inversion keeps them apart
        if ranges and found[0] <= ranges[-1][1]:
            before = ranges.pop()
            found = (before[0], max(before[1], found[1]))
        ranges.append(found)
    return tuple(_closing(curve, lo, hi, exchanges) for lo, hi in ranges)


def _closing(
    curve: GapCurve, lo: float, hi: float, exchanges: tuple[ParityExchange, ...]
) -> Closing:
    inside = tuple(e for e in exchanges if lo <= e.lam <= hi)
    kind = "point" if hi - lo <= _point_width(curve, lo, hi) else "interval"
    if kind == "point":
        lowest = curve.at(inside[0].lam) if inside else curve.lowest_in(lo, hi)
    else:
        lowest = curve.at((lo + hi) / 2)
    return Closing(kind, lowest.lam, lo, hi, lowest.k, lowest.gap_ev, inside)


def _point_width(curve: GapCurve, lo: float, hi: float) -> float:
    """Width of the range below `GAPLESS_EV` were the gap to vanish linearly at one point."""
    slopes = []
    for edge, sign in ((lo, -1.0), (hi, 1.0)):
        outer = edge + sign * SLOPE_STEP
        if 0 < edge < 1 and 0 <= outer <= 1:
            slopes.append(curve.at(outer).gap_ev / SLOPE_STEP)
    slope = min((s for s in slopes if s > 0), default=0.0)
    return POINT_FACTOR * 2 * GAPLESS_EV / slope if slope > 0 else 0.0


def _prove(
    prover: Prover,
    closings: tuple[Closing, ...],
    exchanges: tuple[ParityExchange, ...],
    effort: str,
) -> tuple[tuple[Closing, ...], list[ProvedStretch], int]:
    """Bound the gap between the closings; where one is met on the way, start again with it."""
    budget = int(SOLVES_FOR_30[effort] * min(MOST_FACTOR, (30 / prover.curve.path.n_orb) ** 2.5))
    spent = 0
    for restart in range(MOST_RESTARTS + 1):
        pieces = _pieces(closings, RESOLUTION[effort])
        stretches: list[ProvedStretch] = []
        try:
            for i, (lo, hi) in enumerate(pieces):
                allowed = max(1, (budget - spent) // (len(pieces) - i))
                made, n_solves = prover.prove(lo, hi, max_solves=allowed)
                stretches += made
                spent += n_solves
        except ClosingMetError:
            if restart == MOST_RESTARTS:
                break
            closings = _find_closings(prover.curve, exchanges)
            continue
        break
    return closings, stretches, spent


def _pieces(closings: tuple[Closing, ...], resolution: float) -> list[tuple[float, float]]:
    """Ranges to be proved: what is open, in pieces whose sizes shrink towards the closings."""
    at_closing = {edge for c in closings for edge in (c.lo, c.hi)}
    pieces = []
    for lo, hi in _open_ranges(closings):
        both = lo in at_closing and hi in at_closing
        made = []
        if lo in at_closing:
            made += _towards(lo, (lo + hi) / 2 if both else hi, resolution)
        if hi in at_closing:
            made += _towards(hi, (lo + hi) / 2 if both else lo, resolution)
        pieces += sorted(made or [(lo, hi)])
    return pieces


def _towards(closing: float, far: float, resolution: float) -> list[tuple[float, float]]:
    """Pieces from far to within the resolution of a closing, each `SHRINK` times shorter."""
    edges, width = [far], abs(far - closing)
    while width > resolution * SHRINK:
        width /= SHRINK
        edges.append(closing + np.sign(far - closing) * width)
    if width > resolution:
        edges.append(closing + np.sign(far - closing) * resolution)
    return [(float(min(pair)), float(max(pair))) for pair in itertools.pairwise(edges)]


def _open_ranges(closings: tuple[Closing, ...]) -> list[tuple[float, float]]:
    edges = [0.0, *(edge for c in closings for edge in (c.lo, c.hi)), 1.0]
    return [(lo, hi) for lo, hi in zip(edges[::2], edges[1::2], strict=True) if hi > lo]


def _segments(
    setting: _Setting,
    curve: GapCurve,
    closings: tuple[Closing, ...],
    stretches: Sequence[ProvedStretch],
) -> tuple[Segment, ...]:
    found = []
    for lo, hi in _open_ranges(closings):
        at = [lam for lam in (0.0, 1.0) if lam in (lo, hi)]
        if not at:
            inside = [s for s in curve.samples() if lo < s.lam < hi]
            at = [max(inside, key=lambda s: s.gap_ev).lam if inside else (lo + hi) / 2]
        proved = sum(
            s.hi - s.lo for s in stretches if s.proved_min_ev > 0 and lo <= s.lo and s.hi <= hi
        )
        sides = tuple(setting.indices(lam) for lam in at)
        found.append(Segment(lo, hi, sides, proved / (hi - lo)))
    return tuple(found)


def _levels(
    sectors: tuple[Sectors, ...], exchanges: tuple[ParityExchange, ...]
) -> tuple[TrimLevels, ...]:
    chosen = {e.k for e in exchanges}
    if sectors and not chosen:
        grid = np.linspace(0, 1, 21)
        chosen = {min(sectors, key=lambda s: float(s.at(grid)[0].min())).k}
    return tuple(levels_along(s) for s in sectors if s.k in chosen)


def _proof_note(effort: str, stretches: Sequence[ProvedStretch]) -> str:
    """What is not proved, in one clause; empty if all is that can be."""
    if effort not in RESOLUTION:
        return f"at effort {effort} gaps are sampled, not proved"
    left = [s for s in stretches if s.proved_min_ev == 0]
    if not left:
        return ""
    lo, hi, width = left[0].lo, left[-1].hi, sum(s.hi - s.lo for s in left)
    return (
        f"the budget ended with the gap only sampled over {width:.4f} of λ, between "
        f"{lo:.4f} and {hi:.4f}"
    )
