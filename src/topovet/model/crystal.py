"""The crystal in the Hamiltonian's own cell."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray, frozen


@dataclass(frozen=True, slots=True, eq=False)
class Crystal:
    """Cell and atoms, never a cell that another program standardised.

    Attributes
    ----------
    cell
        (3, 3) angstrom, lattice vectors as rows.
    symbols
        Chemical symbols, one per atom.
    positions_frac
        (n_atoms, 3) fractional, as written (not wrapped).
    periodic
        Which of the three lattice directions are periodic; two of them for a 2D case.
    """

    cell: FloatArray
    symbols: tuple[str, ...]
    positions_frac: FloatArray
    periodic: tuple[bool, bool, bool] = (True, True, True)

    def __post_init__(self) -> None:
        object.__setattr__(self, "cell", frozen(np.asarray(self.cell, dtype=float)))
        positions = np.asarray(self.positions_frac, dtype=float).reshape(-1, 3)
        object.__setattr__(self, "positions_frac", frozen(positions))

    @property
    def dimension(self) -> int:
        return sum(self.periodic)

    @property
    def reciprocal(self) -> FloatArray:
        """(3, 3) reciprocal lattice vectors as rows, 1/angstrom, 2 pi included."""
        return np.asarray(2 * np.pi * np.linalg.inv(self.cell).T)

    @property
    def formula(self) -> str:
        """Reduced formula, electropositive order as given in the file, e.g. Bi2Se3."""
        counts = Counter(self.symbols)
        divisor = int(np.gcd.reduce(list(counts.values()))) if counts else 1
        return "".join(
            symbol + (str(n // divisor) if n > divisor else "") for symbol, n in counts.items()
        )
