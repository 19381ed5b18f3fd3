"""Mirror Chern numbers beyond an exchange of parities that leaves Z2 and Z4 as they are."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from topovet.invariants.closing import REOPENED_EV, gap_minima
from topovet.invariants.mirror_witness import MirrorWitness
from topovet.invariants.tipping import Parameter
from topovet.invariants.tipping_gap import BEYOND
from topovet.invariants.tipping_results import TippingPoint
from topovet.model.declarations import Declarations
from topovet.model.fourier import added_sum
from topovet.model.spin_parts import Frame
from topovet.notation import significant
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.task import NotApplicable
from topovet.spectrum.results import Electrons, GapSample


@dataclass(frozen=True, slots=True)
class FarSide:
    """Mirror Chern numbers beyond an exchange that Z2 and Z4 do not notice.

    `count` is the task of the mirror witness with all but the Hamiltonian and its gap filled in.
    """

    based: BasedHamiltonian
    declared: Declarations
    electrons: Electrons
    gap: GapSample
    parameters: list[Parameter]
    frame: Frame
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
                    note=f"mirror Chern numbers counted at {significant(value)}",
                )
        return point

    def _numbers(self, point: TippingPoint, value: float) -> dict[str, int] | None:
        """At one value of the parameter; None where the gap is narrow or nothing is counted."""
        bloch = self.based.lattice.bloch
        named = (point.parameter, point.group)
        parameter = next(p for p in self.parameters if (p.kind, p.name) == named)
        there = added_sum(bloch, parameter.change(bloch, self.frame), value - parameter.begin)
        known = np.array([self.gap.direct_k, *point.k])
        periodic = self.declared.crystal.periodic
        minima = gap_minima(there, self.electrons.filling, periodic, known)
        if minima.values[0] < REOPENED_EV:
            return None
        lattice = replace(self.based.lattice, bloch=there)
        try:
            witness = self.count(
                hamiltonian_with_basis=replace(self.based, lattice=lattice),
                gap=replace(self.gap, direct_ev=float(minima.values[0]), status="insulator"),
            )
        except NotApplicable:
            return None
        return witness.numbers if witness.status == "ok" else None
