"""The orbital basis: where each Wannier function sits and what it looks like there."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray, frozen


@dataclass(frozen=True, slots=True, eq=False)
class OrbitalBasis:
    """Sites and real-harmonic content of the Wannier functions.

    Attributes
    ----------
    positions_frac
        (n_orb, 3) site of each Wannier function, fractional, in the cell that R = 0 refers to.
    harmonics
        (n_orb, 16) coefficients of the real harmonics s | pz px py | dz2 dxz dyz dx2-y2 dxy |
        fz3 fxz2 fyz2 fz(x2-y2) fxyz fx(x2-3y2) fy(3x2-y2) in the crystal's Cartesian frame.
    spinors
        (n_orb, 2) spin state (up, down along z); (1, 0) for every spinless function.
    labels
        Name of each Wannier function, e.g. "Bi1 pz up".
    shells
        (n_orb,) radial function number; functions of different shells do not overlap even where
        site, harmonic and spin agree.
    """

    positions_frac: FloatArray
    harmonics: FloatArray
    spinors: ComplexArray
    labels: tuple[str, ...]
    shells: IntArray

    def __post_init__(self) -> None:
        for name in ("positions_frac", "harmonics", "spinors", "shells"):
            object.__setattr__(self, name, frozen(getattr(self, name)))

    @property
    def n_orb(self) -> int:
        return len(self.labels)

    def reordered(self, order: IntArray) -> OrbitalBasis:
        """The same functions in another order: new[i] = old[order[i]]."""
        return OrbitalBasis(
            self.positions_frac[order],
            self.harmonics[order],
            self.spinors[order],
            tuple(self.labels[i] for i in np.asarray(order)),
            self.shells[order],
        )
