"""Irreps joined by time reversal, as they occur in bands and in orbitals."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, IntArray
from topovet.errors import TopovetError
from topovet.symmetry.irreps import Irrep, compute_irreps
from topovet.symmetry.little_group import LittleGroup


class CorepresentationError(TopovetError):
    """Counts of irreps that are no whole numbers of corepresentations."""


@dataclass(frozen=True, slots=True, eq=False)
class Corep:
    """One irreducible corepresentation.

    Attributes
    ----------
    irreps
        Positions of its irreps: one, or the two that time reversal pairs.
    weight
        How often each occurs: 2 for an irrep that is degenerate with itself.
    dimension
        Bands that a level of it has.
    """

    irreps: tuple[int, ...]
    weight: int
    dimension: int


@dataclass(frozen=True, slots=True, eq=False)
class CorepTable:
    """All corepresentations of one little group or site-symmetry group.

    Attributes
    ----------
    group
        The group.
    irreps, coreps
        Its irreps, and what time reversal makes of them.
    """

    group: LittleGroup
    irreps: tuple[Irrep, ...]
    coreps: tuple[Corep, ...]

    @property
    def irrep_characters(self) -> ComplexArray:
        """(n_irrep, n) in the order of the members."""
        return np.array([irrep.characters for irrep in self.irreps])

    @property
    def characters(self) -> ComplexArray:
        """(n_corep, n) of the unitary members."""
        of_irreps = self.irrep_characters
        return np.array([c.weight * of_irreps[list(c.irreps)].sum(axis=0) for c in self.coreps])

    def count(self, characters: ComplexArray) -> IntArray:
        """Multiplicities (..., n_corep) of representations with characters (..., n).

        Raises
        ------
        CorepresentationError
            They are no non-negative integers, or contradict time reversal.
        """
        shares = characters @ self.irrep_characters.conj().T / len(self.group.members)
        numbers = np.round(shares.real).astype(np.int64)
        if np.abs(shares - numbers).max(initial=0.0) > 1e-6 or (numbers < 0).any():
            raise CorepresentationError("characters are not those of a representation")
        return self.from_irreps(numbers)

    def from_irreps(self, counts: IntArray) -> IntArray:
        """Multiplicities (..., n_corep) from those of the irreps, (..., n_irrep).

        Raises
        ------
        CorepresentationError
            Partners occur unequally often, or an irrep that must be doubled an odd number of times.
        """
        counts = np.asarray(counts, dtype=np.int64)
        found = np.stack([counts[..., c.irreps[0]] // c.weight for c in self.coreps], axis=-1)
        back = np.zeros_like(counts)
        for position, corep in enumerate(self.coreps):
            for i in corep.irreps:
                back[..., i] = corep.weight * found[..., position]
        if (back != counts).any():
            raise CorepresentationError(
                "the counts of irreps do not fit the degeneracies that time reversal enforces at "
                f"k = {np.round(self.group.k_frac, 4).tolist()}"
            )
        return np.asarray(found)


def find_coreps(group: LittleGroup) -> CorepTable:
    """Irreps of a group with its factor system, joined by Herring's test."""
    irreps = compute_irreps(group)
    coreps = []
    for i, irrep in enumerate(irreps):
        if irrep.time_reversal == "doubled":
            coreps.append(Corep((i,), 2, 2 * irrep.dimension))
        elif irrep.partner == i:
            coreps.append(Corep((i,), 1, irrep.dimension))
        elif i < irrep.partner:
            coreps.append(Corep((i, irrep.partner), 1, 2 * irrep.dimension))
    return CorepTable(group, irreps, tuple(coreps))
