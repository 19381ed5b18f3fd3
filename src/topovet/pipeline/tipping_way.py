"""Before and beyond an exchange of parities: the gap on the way, mirror Chern numbers after it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from topovet.invariants.mirror_witness import MirrorWitness
from topovet.invariants.tipping.by_gap import BEYOND
from topovet.invariants.tipping.closing import REOPENED_EV, gap_minima, gap_on_the_way
from topovet.invariants.tipping.results import TippingPoint
from topovet.invariants.tipping.search import Parameter
from topovet.model.declarations import Declarations
from topovet.model.fourier import BlochSum, added_sum
from topovet.model.spin_parts import Frame
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.task import NotApplicable
from topovet.spectrum.results import Electrons, GapSample


@dataclass(frozen=True, slots=True)
class Way:
    """H + t V for the parameters of a search, and where its gap is small."""

    based: BasedHamiltonian
    declared: Declarations
    electrons: Electrons
    gap: GapSample
    parameters: list[Parameter]
    frame: Frame

    def parameter(self, point: TippingPoint) -> Parameter:
        """What was turned to find the point."""
        named = (point.parameter, point.group)
        return next(p for p in self.parameters if (p.kind, p.name) == named)

    def change(self, point: TippingPoint) -> BlochSum:
        """V(k)."""
        return self.parameter(point).change(self.based.lattice.bloch, self.frame)

    def sampled(self, point: TippingPoint) -> TippingPoint:
        """The point with the smallest gap met on the way to its exchange, if there is one."""
        if point.critical is None:
            return point
        end = point.critical - self.parameter(point).begin
        found = gap_on_the_way(
            self.based.lattice.bloch,
            self.change(point),
            self.electrons.filling,
            self.declared.crystal.periodic,
            end,
            np.array([self.gap.direct_k, *point.k]),
        )
        lowest = int(found.values.argmin())
        x, y, z = (float(c) for c in np.round(0.5 - (0.5 - found.k_frac[lowest]) % 1.0, 6) + 0.0)
        gap_ev = float(found.values[lowest])
        return replace(point, gap_on_the_way_ev=gap_ev, gap_on_the_way_k=(x, y, z))


@dataclass(frozen=True, slots=True)
class FarSide:
    """Mirror Chern numbers beyond an exchange that Z2 and Z4 do not notice.

    `count` is the task of the mirror witness with all but the Hamiltonian and its gap filled in.
    """

    way: Way
    count: Callable[..., MirrorWitness]

    def counted(self, point: TippingPoint, before: MirrorWitness) -> TippingPoint:
        """The point with the numbers on both sides, where they are in question and can be had."""
        if point.outcome != "exchange" or point.critical is None or not before.numbers:
            return point
        sign = 1.0 if point.direction == "up" else -1.0
        for distance in BEYOND:
            value = point.critical + sign * distance
            after = self._numbers(point, value)
            if after is not None and set(after) == set(before.numbers):
                return replace(
                    point,
                    outcome="reopens" if after == before.numbers else "flips",
                    mirror_before=tuple(before.numbers.items()),
                    mirror_after=tuple(after.items()),
                    searched_to=value,
                    note=f"mirror Chern numbers counted at {point.value_text(value)}",
                )
        return point

    def _numbers(self, point: TippingPoint, value: float) -> dict[str, int] | None:
        """At one value of the parameter; None where the gap is narrow or nothing is counted."""
        way, begin = self.way, self.way.parameter(point).begin
        there = added_sum(way.based.lattice.bloch, way.change(point), value - begin)
        known = np.array([way.gap.direct_k, *point.k])
        periodic = way.declared.crystal.periodic
        minima = gap_minima(there, way.electrons.filling, periodic, known)
        if minima.values[0] < REOPENED_EV:
            return None
        lattice = replace(way.based.lattice, bloch=there)
        try:
            witness = self.count(
                hamiltonian_with_basis=replace(way.based, lattice=lattice),
                gap=replace(way.gap, direct_ev=float(minima.values[0]), status="insulator"),
            )
        except NotApplicable:
            return None
        return witness.numbers if witness.status == "ok" else None
