"""The tight-binding Hamiltonian H(R): Hermitian, weights included, immutable."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, IntArray, frozen


@dataclass(frozen=True, slots=True, eq=False)
class TightBindingModel:
    """H_mn(R) in the periodic gauge, H(k) = sum_R exp(+2 pi i k.R) H(R).

    Degeneracies and `use_ws_distance` shifts are already applied, and H(-R) = H(R)† holds to the
    last bit: what the files break of it is recorded by the audit, not carried along here.

    Attributes
    ----------
    r_cells
        (n_r, 3) integer lattice vectors, sorted lexicographically, each with its negative, so
        that r_cells[::-1] == -r_cells.
    h_r
        (n_r, n_orb, n_orb) eV, element [r, m, n] = <m 0|H|n R>.
    spinful
        Whether orbitals are spinor components (spin counted in the filling).
    """

    r_cells: IntArray
    h_r: ComplexArray
    spinful: bool

    def __post_init__(self) -> None:
        if not np.array_equal(self.r_cells[::-1], -self.r_cells):
            raise ValueError("r_cells must be sorted and closed under negation")
        object.__setattr__(self, "r_cells", frozen(self.r_cells))
        object.__setattr__(self, "h_r", frozen(self.h_r))

    @property
    def n_orb(self) -> int:
        return int(self.h_r.shape[1])

    @property
    def n_r(self) -> int:
        return int(self.r_cells.shape[0])


def build_model(
    r_cells: IntArray, h_r: ComplexArray, *, spinful: bool, consume: bool = False
) -> TightBindingModel:
    """Model from any list of R and H(R): duplicates are summed, the rest made Hermitian.

    An R whose partner -R is present is averaged with it, (H(R) + H(-R)†)/2; an R whose partner is
    missing supplies it. Neither is silent: the intake audit measures both.

    Parameters
    ----------
    r_cells
        (n_r, 3) integers in any order.
    h_r
        (n_r, n_orb, n_orb) eV with all weights applied.
    spinful
        See `TightBindingModel`.
    consume
        Allow h_r to be overwritten, which saves one copy of it.

    Returns
    -------
    TightBindingModel
    """
    r_cells = np.asarray(r_cells, dtype=np.int64)
    closed = np.unique(np.concatenate([r_cells, -r_cells]), axis=0)
    index = r_index(closed, r_cells)
    in_order = len(closed) == len(r_cells) and np.array_equal(index, np.arange(len(closed)))
    if in_order:
        full = h_r if consume and h_r.flags.writeable else h_r.copy()
    else:
        full = np.zeros((len(closed), *h_r.shape[1:]), dtype=np.complex128)
        np.add.at(full, index, h_r)
    present = np.zeros(len(closed), dtype=bool)
    present[index] = True
    n_r = len(closed)
    for i in range((n_r + 1) // 2):  # partner of i is n_r - 1 - i by the sort order
        j = n_r - 1 - i
        if present[i] and present[j]:
            mean = 0.5 * (full[i] + full[j].conj().T)
        else:
            mean = full[i] if present[i] else full[j].conj().T
        full[i] = mean
        full[j] = mean.conj().T
    return TightBindingModel(closed, full, spinful)


def r_index(r_cells: IntArray, wanted: IntArray) -> IntArray:
    """Row of each wanted lattice vector in r_cells, -1 where it is absent.

    Parameters
    ----------
    r_cells
        (n_r, 3) distinct integer vectors.
    wanted
        (n, 3) integer vectors.
    """
    both = np.concatenate([r_cells, wanted])
    low = both.min(axis=0)
    extent = both.max(axis=0) - low + 1
    keys = np.ravel_multi_index(tuple((r_cells - low).T), tuple(extent))
    sought = np.ravel_multi_index(tuple((wanted - low).T), tuple(extent))
    order = np.argsort(keys)
    at = np.searchsorted(keys, sought, sorter=order).clip(max=len(keys) - 1)
    found = order[at]
    return np.asarray(np.where(keys[found] == sought, found, -1), dtype=np.int64)
