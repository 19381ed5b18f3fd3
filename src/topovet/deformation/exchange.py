"""Parity exchanges at the TRIM: every lambda at which the gap closes there, found without sampling.

At a TRIM K inversion P_K commutes with H(lambda, K) for all lambda if it does at both ends, so that
H falls into an even and an odd block, each affine in lambda. `invariants.exchange` finds where
filled and empty states of opposite parity change places.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.deformation.path import Path
from topovet.deformation.results import ParityExchange, Point, TrimLevels
from topovet.invariants.exchange import ParityBlocks, all_exchanges, parity_blocks
from topovet.symmetry.inversion import inversion_at
from topovet.symmetry.results import InversionOperator
from topovet.symmetry.trim import trim_points

N_SHOWN = 61
"""Values of lambda at which levels are kept for display."""


@dataclass(frozen=True, slots=True, eq=False)
class Sectors:
    """One TRIM.

    Attributes
    ----------
    k
        The TRIM.
    filling
        Occupied bands.
    blocks
        H at lambda = 0 and its change, for either parity; levels are single states.
    """

    k: Point
    filling: int
    blocks: ParityBlocks

    def at(self, lams: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Gap and its middle, (n,) eV each."""
        energies = np.sort(np.concatenate(self.blocks.levels(lams), axis=1), axis=1)
        low, high = energies[:, self.filling - 1], energies[:, self.filling]
        return high - low, (high + low) / 2


def split_by_parity(
    path: Path,
    inversion: InversionOperator,
    filling: int,
    periodic: tuple[bool, bool, bool],
) -> tuple[Sectors, ...]:
    """The blocks of every TRIM."""
    k_trim = trim_points(periodic)
    operators = inversion_at(inversion, k_trim)
    start, change = path.start.at(k_trim), path.change.at(k_trim)
    return tuple(
        Sectors((float(x), float(y), float(z)), filling, parity_blocks(h, v, p, kramers=False))
        for (x, y, z), h, v, p in zip(k_trim, start, change, operators, strict=True)
    )


def find_exchanges(sectors: Sectors) -> tuple[ParityExchange, ...]:
    """All exchanges at one TRIM, by ascending lambda; see `all_exchanges`."""
    found = []
    for exchange in all_exchanges(sectors.blocks, sectors.filling):
        ends = np.array([exchange.low, exchange.high])
        found.append(
            ParityExchange(
                lam=float(ends.mean()),
                k=sectors.k,
                n_minus_before=exchange.n_odd,
                n_minus_after=exchange.n_odd_after,
                energy_ev=float(sectors.at(ends)[1].mean()),
            )
        )
    return tuple(found)


def levels_along(sectors: Sectors) -> TrimLevels:
    """Levels of one TRIM for display."""
    lams = np.linspace(0, 1, N_SHOWN)
    even, odd = sectors.blocks.levels(lams)
    gap, middle = sectors.at(lams)
    edges = np.stack([middle - gap / 2, middle + gap / 2], axis=1)
    return TrimLevels(sectors.k, lams, even, odd, edges)
