"""What the experiments find: evidence, no verdict."""

from __future__ import annotations

from dataclasses import dataclass

from topovet.invariants.results import ParityWitness, WilsonWitness
from topovet.spectrum.results import GapSample
from topovet.symmetry.results import InversionTest, TimeReversalTest

KINDS = (
    "declaration",
    "centre",
    "filling",
    "symmetrised",
    "shorter-range",
    "bare",
    "closer-look",
)
"""Ways of reading a case anew, in the order in which they are tried."""


@dataclass(frozen=True, slots=True, eq=False)
class Rereading:
    """The case read in one other way, and what the witnesses say then.

    Attributes
    ----------
    kind
        One of `KINDS`.
    change
        What is read differently, one clause.
    filling
        Occupied bands.
    moved_mev
        Most that a band moves at the sampled k; None where H is the same.
    gap
        Sampled anew.
    typical_gap_ev
        Median over the mesh of the gap between the last occupied and the first empty band.
    time_reversal, inversion
        Measured anew where H or the operator changed.
    parity
        None without inversion.
    wilson
        None where the gap is closed or there are no Kramers pairs.
    """

    kind: str
    change: str
    filling: int
    moved_mev: float | None
    gap: GapSample
    typical_gap_ev: float
    time_reversal: TimeReversalTest
    inversion: InversionTest
    parity: ParityWitness | None
    wilson: WilsonWitness | None

    @property
    def z2(self) -> tuple[int, ...] | None:
        """What parities and Wilson loops say together; None where they differ or are silent, or
        where the gap closes and there is nothing to say."""
        if self.gap.status in ("gapless", "unresolved"):
            return None
        said = {
            witness.z2
            for witness in (self.parity, self.wilson)
            if witness is not None and witness.status == "ok" and witness.z2 is not None
        }
        return said.pop() if len(said) == 1 else None


@dataclass(frozen=True, slots=True)
class NoiseTest:
    """Whether what breaks a symmetry looks like noise on every element of H(R).

    Attributes
    ----------
    of
        "time reversal" or "inversion".
    sigma_mev
        Size of the noise on an element that would explain the residual.
    filled
        Share of the elements of H(R) whose residual is above a tenth of the mean size: 0.99 for
        complex Gaussian noise, little for a physical term, which falls off with distance.
    growth
        Power of |H_mn(R)| with which the residual grows from the weakest quarter of the elements
        to the strongest: near 0 for noise, 1 where hoppings were scaled. None where elements are
        too much alike to say.
    """

    of: str
    sigma_mev: float
    filled: float
    growth: float | None


@dataclass(frozen=True, slots=True, eq=False)
class Experiments:
    """All experiments of one case.

    Attributes
    ----------
    asked_because
        What called for them, one clause.
    rereadings
        In the order of `KINDS`; fillings rising.
    noise
        One entry for each broken symmetry that was looked at.
    typical_gap_ev
        Of the case as it was read, see `Rereading`.
    """

    asked_because: str
    rereadings: tuple[Rereading, ...]
    noise: tuple[NoiseTest, ...]
    typical_gap_ev: float

    def of_kind(self, kind: str) -> tuple[Rereading, ...]:
        return tuple(reading for reading in self.rereadings if reading.kind == kind)
