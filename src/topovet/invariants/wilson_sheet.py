"""A plane of k, or half of one, covered by lines close enough to follow the occupied states.

Lines are inserted until in every strip between neighbours (a) the links across lose little, (b) no
plaquette carries a large Berry flux, and (c) the centres move little: either each of them by less
than a fraction of the largest gap between centres on both lines, or only their sum. Lines
through the narrowest places of the direct gap are added, for that is where states turn fastest.
States are dropped as soon as both strips beside their line are done.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass, field, replace

import numpy as np

from topovet.arrays import BoolArray, FloatArray
from topovet.errors import ConvergenceError
from topovet.invariants.flow import distance_to_set, largest_gaps, steps_of_flux
from topovet.invariants.wilson_line import (
    LineCriteria,
    Reversal,
    SolvedLine,
    extend_line,
    solve_lines,
)
from topovet.invariants.wilson_strip import StripFlux, StripLimits, strip_fluxes
from topovet.model.fourier import CHUNK_BYTES
from topovet.spectrum.gap import GAPLESS_EV
from topovet.spectrum.plane_states import PlaneStates, narrow_spots
from topovet.units import MEV_PER_EV


@dataclass(frozen=True, slots=True)
class SheetCriteria:
    """When a plane has enough lines.

    Attributes
    ----------
    line
        When a line has enough points.
    spacing
        Distance of the lines to begin with, 1 over an even integer.
    strip
        What every strip keeps to.
    gap_step
        Largest movement of centres from line to line, as a fraction of the largest gap on either;
        at 1/2 a centre could reach the middle of the gap.
    sum_step
        Largest movement of the sum of the centres, where only that is followed; below 1/2 it needs
        no flux to be known.
    narrow
        Places where the gap is small over less than this get a line and a point of their own.
    finest
        Smallest distance of lines.
    max_solves
        Budget of eigenvalue problems for the plane.
    """

    line: LineCriteria = field(default_factory=LineCriteria)
    spacing: float = 1 / 16
    strip: StripLimits = field(default_factory=StripLimits)
    gap_step: float = 0.3
    sum_step: float = 0.25
    narrow: float = 1 / 12
    finest: float = 2.0**-22
    max_solves: int = 20_000


CRITERIA = {
    "quick": SheetCriteria(max_solves=5_000),
    "standard": SheetCriteria(),
    "thorough": SheetCriteria(
        line=LineCriteria(points=24, loss=0.2, point_step=0.05),
        spacing=1 / 32,
        strip=StripLimits(flux=np.pi / 3, loss=0.5),
        gap_step=0.15,
        sum_step=0.1,
        max_solves=100_000,
    ),
}
"""By effort. The standard ones were tried on random planes with time reversal alone, a band width
of about 10 eV and gaps down to 1e-4 eV, each swept both ways: of 10,000 with 4 to 12 bands one
sweep was wrong, of 2,400 with 16 to 20 bands two, and each time the other way said otherwise. With
closest matches in place of the flux 34 of the first 400 were wrong, with strips not limited by loss
5 of the first 1,600."""


class Sheet:
    """Lines from one end of a plane to the other, and the flux through the strips between them.

    Parameters
    ----------
    states
        Solves the plane.
    criteria
        When there are enough lines.
    reversal
        Time reversal, given for half a plane: lines run from 0 to 1/2. Without it they cover the
        whole plane, 0 to 1, and the line at 1 is that at 0 (periodic gauge).
    follow_gap
        Whether the centres are followed one by one in condition (c), or only their sum.
    """

    def __init__(
        self,
        states: PlaneStates,
        criteria: SheetCriteria,
        *,
        reversal: Reversal | None,
        follow_gap: bool,
    ) -> None:
        self.states = states
        self.criteria = criteria
        self._reversal = reversal
        self._follow_gap = follow_gap
        self._closing = states.closing(np.array([0.0, 1.0]))
        self._end = 1.0 if reversal is None else 0.5
        self._lines: dict[float, SolvedLine] = {}
        self._fluxes: dict[tuple[float, float], StripFlux] = {}

    def refine(self) -> str:
        """Cover the plane; the reason where that cannot be done, empty if all went well."""
        try:
            return self._refine()
        except ConvergenceError as error:
            return f"{error}; {self.gap_words()}"

    @property
    def lines(self) -> list[SolvedLine]:
        """By rising coordinate, both ends included."""
        lines = [self._lines[x] for x in sorted(self._lines)]
        if self._end == 1.0 and lines:
            lines.append(replace(lines[0], across=1.0))
        return lines

    @property
    def across(self) -> FloatArray:
        """(n_lines,)."""
        return np.array([line.across for line in self.lines])

    @property
    def hwcc(self) -> FloatArray:
        """(n_lines, n_occ)."""
        return np.array([line.hwcc for line in self.lines])

    @property
    def fluxes(self) -> list[StripFlux]:
        """Flux through each strip."""
        return [self._fluxes[pair] for pair in itertools.pairwise(self.across.tolist())]

    @property
    def steps(self) -> FloatArray:
        """(n_lines - 1, n_occ) how far each centre moves to the next line."""
        hwcc, turns = self.hwcc, np.array([flux.turns for flux in self.fluxes])
        return steps_of_flux(hwcc[:-1], hwcc[1:], turns)

    def narrowest_k(self) -> tuple[float, tuple[float, float, float]]:
        """Smallest direct gap that was met, eV, and its fractional k."""
        gap, xy = self.states.narrowest()
        x, y, z = (float(c) % 1.0 for c in self.states.plane.k_at(np.array([xy]))[0])
        return gap, (x, y, z)

    def gap_words(self) -> str:
        gap, k = self.narrowest_k()
        if np.isinf(gap):
            return "no gap was measured"
        shown = ", ".join(f"{c:.4f}" for c in k)
        return f"the direct gap goes down to {MEV_PER_EV * gap:.3g} meV at k = ({shown})"

    def _refine(self) -> str:
        first = np.linspace(0.0, self._end, round(self._end / self.criteria.spacing) + 1)
        self._add(first if self._end < 1.0 else first[:-1])
        spots = narrow_spots(self.states)
        for x, y in spots.xy[spots.widths < self.criteria.narrow]:
            if self._reversal is not None and x > 0.5:
                self._visit(1.0 - x, 1.0 - y)
            else:
                self._visit(x, y)
        while self.states.narrowest()[0] > GAPLESS_EV:
            self._measure_strips()
            wide = self._wide_strips()
            self._drop_states(wide)
            if not wide.any():
                return ""
            crowded = wide & ~self._extend_lines(wide)
            across = self.across
            spacing = np.diff(across)[crowded]
            if spacing.min(initial=1.0) < self.criteria.finest:
                return (
                    f"states still turn between lines {spacing.min():.0e} apart at "
                    f"{across[:-1][crowded][spacing.argmin()]:.6f} across the plane; "
                    f"{self.gap_words()}"
                )
            self._add(across[:-1][crowded] + spacing / 2)
        return f"the gap closes on the plane: {self.gap_words()}"

    def _visit(self, x: float, y: float) -> None:
        """A line through (x, y) with a point there, if there is none yet."""
        across, finest = self.across, self.criteria.finest
        nearest = int(np.abs(across - x).argmin())
        if abs(across[nearest] - x) > finest:
            self._add(np.array([x]), extra=np.array([y]))
        elif distance_to_set(np.array([y]), self.lines[nearest].along)[0] > finest:
            self._extend(self._home(float(across[nearest])), np.array([y]))

    def _wide_strips(self) -> BoolArray:
        """(n_strips,) whether more lines or points are needed there."""
        limits, fluxes = self.criteria.strip, self.fluxes
        wide = np.array([f.largest > limits.flux or f.loss > limits.loss for f in fluxes])
        if self._follow_gap:
            width = largest_gaps(self.hwcc)[1]
            moved = np.abs(self.steps).max(axis=1)
            wide |= moved > self.criteria.gap_step * np.minimum(width[:-1], width[1:])
        else:
            wide |= np.abs([f.turns for f in fluxes]) > self.criteria.sum_step
        return wide

    def _measure_strips(self) -> None:
        """Flux through the strips that are new or whose lines have changed."""
        pairs = itertools.pairwise(self.across.tolist())
        strips = [pair for pair in pairs if pair not in self._fluxes]
        for x in {self._home(x) for pair in strips for x in pair}:
            if self._lines[x].states is None:
                self._extend(x, np.empty(0))
        lines = {line.across: line for line in self.lines}
        for start in range(0, len(strips), self._batch):
            part = strips[start : start + self._batch]
            found = strip_fluxes(
                [(lines[a], lines[b]) for a, b in part], self.criteria.strip, self._closing
            )
            self._fluxes.update(zip(part, found, strict=True))

    def _extend_lines(self, wide: BoolArray) -> BoolArray:
        """Points added where lines, not their distance, limit a strip; (n_strips,) where."""
        missing: dict[float, list[FloatArray]] = {}
        limited = np.zeros(len(wide), dtype=bool)
        across, fluxes = self.across.tolist(), self.fluxes
        for i in np.flatnonzero(wide):
            sides = (across[i], fluxes[i].coarse_lower), (across[i + 1], fluxes[i].coarse_upper)
            for x, along in sides:
                if len(along):
                    missing.setdefault(self._home(x), []).append(along)
                    limited[i] = True
        for x, parts in missing.items():
            self._extend(x, np.unique(np.concatenate(parts)))
            self._fluxes = {
                pair: flux
                for pair, flux in self._fluxes.items()
                if x not in (self._home(pair[0]), self._home(pair[1]))
            }
        return limited

    def _drop_states(self, wide: BoolArray) -> None:
        """Only lines beside a strip that is not done keep their states."""
        beside = np.append(wide, False) | np.append(False, wide)
        needed = {self._home(x) for x in self.across[beside].tolist()}
        for x in set(self._lines) - needed:
            self._lines[x] = replace(self._lines[x], states=None)

    def _home(self, x: float) -> float:
        """Where the line at x is kept: that at 1 is that at 0."""
        return 0.0 if x == 1.0 else x

    def _add(self, across: FloatArray, extra: FloatArray | None = None) -> None:
        for start in range(0, len(across), self._batch):
            part = slice(start, start + self._batch)
            solved = solve_lines(
                self.states.states_at,
                across[part],
                self.criteria.line,
                extra=None if extra is None else extra[part],
                reversal=self._reversal,
                closing=self._closing,
            )
            self._lines.update((line.across, line) for line in solved)

    def _extend(self, x: float, along: FloatArray) -> None:
        self._lines[x] = extend_line(
            self.states.states_at,
            self._lines[x],
            along,
            self.criteria.line,
            reversal=self._reversal,
            closing=self._closing,
        )

    @property
    def _batch(self) -> int:
        """Lines that are worked on together, within the memory for a chunk."""
        per_line = 2 * self.criteria.line.points * self.states.bytes_per_k
        return int(max(1, CHUNK_BYTES // per_line))
