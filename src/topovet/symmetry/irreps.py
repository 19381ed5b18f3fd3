"""Irreducible representations of a little group, by splitting its regular representation.

The regular representation with factor system omega, L_g e_h = omega(g, h) e_gh, holds each irrep
as often as its dimension. A random Hermitian matrix averaged over the group commutes with all L_g
and, barring accidents, has no degeneracies but those the group enforces: each of its
eigenspaces carries one irrep. That works for any finite group and factor system; the result is
checked by sum d^2 = n and by orthogonality, so an accident cannot pass.

Time reversal, and its products with space-group operations, join irreps into co-representations
according to Wigner's test, sum over antiunitary a of chi(a^2) / n = +1, -1 or 0.

References
----------
Dixon, Math. Comp. 24, 707 (1970), doi:10.1090/S0025-5718-1970-0280611-6 (reduction by a random
commuting matrix). Herring, Phys. Rev. 52, 361 (1937); Bradley, Cracknell, The Mathematical Theory
of Symmetry in Solids (Oxford, 1972), sections 3.7 and 7.3 (time reversal).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray, frozen
from topovet.errors import TopovetError
from topovet.symmetry.little_group import LittleGroup

SEED = 20070206
"""Start of the random matrix; the result does not depend on it but for a unitary within an
irrep."""

ATTEMPTS = 5
"""Random matrices tried; one fails only by an accidental near-degeneracy."""

DEGENERACY = 1e-7
"""Eigenvalues of the averaged matrix, of order 1, that differ by less belong together."""

CHARACTER_TOLERANCE = 1e-6
"""Largest defect of orthogonality and of Wigner's test."""

WIGNER_KINDS = {1: "real", -1: "doubled", 0: "paired"}


class IrrepError(TopovetError):
    """The regular representation could not be split: the factor system is not one."""


@dataclass(frozen=True, slots=True, eq=False)
class Irrep:
    """One irreducible representation of a little group.

    Attributes
    ----------
    matrices
        (n, d, d) unitary, in the order of the members.
    characters
        (n,) their traces; of the operations {W|w} as listed, Bloch phase included.
    time_reversal
        "real": stays as it is; "doubled": degenerate with itself; "paired": degenerate with
        another irrep; "none": the little group has no antiunitary operation.
    partner
        Index of the irrep it is degenerate with: its own unless "paired".
    """

    matrices: ComplexArray
    characters: ComplexArray
    time_reversal: str
    partner: int

    def __post_init__(self) -> None:
        object.__setattr__(self, "matrices", frozen(self.matrices))
        object.__setattr__(self, "characters", frozen(self.characters))

    @property
    def dimension(self) -> int:
        return int(self.matrices.shape[1])

    @property
    def level_dimension(self) -> int:
        """Bands that a level of this irrep has at least, time reversal included."""
        return self.dimension * (1 if self.time_reversal in ("real", "none") else 2)


def compute_irreps(group: LittleGroup) -> tuple[Irrep, ...]:
    """All irreps of a little group with its factor system at k, double-valued for spinors.

    Returns
    -------
    tuple of Irrep
        Ordered by dimension, then by characters: the same in every run.

    Raises
    ------
    IrrepError
        The multiplication table or the factors are not those of a group.
    """
    matrices = _distinct(_split_regular(group), group)
    characters = np.array([np.trace(m, axis1=1, axis2=2) for m in matrices])
    wigner = _wigner_numbers(group, characters)
    partners = _partners(group, characters, wigner)
    return tuple(
        Irrep(
            matrices=m,
            characters=c,
            time_reversal="none" if not len(group.reversing) else WIGNER_KINDS[int(w)],
            partner=int(p),
        )
        for m, c, w, p in zip(matrices, characters, wigner, partners, strict=True)
    )


def _split_regular(group: LittleGroup) -> list[ComplexArray]:
    """Irreps as (n, d, d) matrices, each as often as it occurs in the regular representation."""
    n = len(group.members)
    for attempt in range(ATTEMPTS):
        commuting = _average(group, _random_hermitian(n, SEED + attempt))
        values, vectors = np.linalg.eigh(commuting)
        edges = np.flatnonzero(np.diff(values) > DEGENERACY) + 1
        spaces = [vectors[:, part] for part in np.split(np.arange(n), edges)]
        found = [_restrict(group, space) for space in spaces]
        # an eigenspace with one irrep has sum |chi|^2 = n; more mean an accident
        norms = [float((np.abs(np.trace(m, axis1=1, axis2=2)) ** 2).sum()) / n for m in found]
        if all(abs(norm - 1) < CHARACTER_TOLERANCE for norm in norms):
            return found
    raise IrrepError(
        "the regular representation of the little group at k = "
        f"{np.round(group.k_frac, 4).tolist()} could not be split into irreps"
    )


def _random_hermitian(n: int, seed: int) -> ComplexArray:
    rng = np.random.default_rng(seed)
    x = rng.standard_normal((n, n)) + 1j * rng.standard_normal((n, n))
    return np.asarray(x + x.conj().T)


def _average(group: LittleGroup, x: ComplexArray) -> ComplexArray:
    """(1/n) sum_g L_g x L_g†, with (L_g x L_g†)[gh, gh'] = omega(g,h) x[h,h'] omega(g,h')*."""
    mean = np.zeros_like(x)
    for row, factor in zip(group.product, group.factors, strict=True):
        mean[np.ix_(row, row)] += factor[:, None] * x * factor.conj()
    return np.asarray(mean / len(group.members))


def _restrict(group: LittleGroup, space: ComplexArray) -> ComplexArray:
    """(n, d, d) matrices V† L_g V on an eigenspace."""
    moved = np.empty((len(group.members), *space.shape), dtype=np.complex128)
    for g, (row, factor) in enumerate(zip(group.product, group.factors, strict=True)):
        moved[g, row] = factor[:, None] * space
    return np.asarray(space.conj().T @ moved)


def _distinct(found: list[ComplexArray], group: LittleGroup) -> list[ComplexArray]:
    """One of each kind, in a fixed order, after checking that none is missing."""
    n = len(group.members)
    characters = np.array([np.trace(m, axis1=1, axis2=2) for m in found])
    overlap = np.abs(characters @ characters.conj().T) / n
    if np.abs(overlap - np.round(overlap)).max() > CHARACTER_TOLERANCE:
        raise IrrepError("characters of the little group are not orthogonal")
    first = sorted(set(np.argmax(overlap > 0.5, axis=1).tolist()))
    if sum(found[i].shape[1] ** 2 for i in first) != n:
        raise IrrepError("the dimensions of the irreps do not add up to the order of the group")
    return [found[i] for i in sorted(first, key=lambda i: _order(characters[i], found[i]))]


def _order(characters: ComplexArray, matrices: ComplexArray) -> tuple[float, ...]:
    """Sorting key: dimension, then larger characters first, in the order of the members."""
    rounded = np.round(characters, 4) + 0.0
    parts = np.stack([-rounded.real, -rounded.imag], axis=1).reshape(-1)
    return (float(matrices.shape[1]), *parts.tolist())


def _wigner_numbers(group: LittleGroup, characters: ComplexArray) -> IntArray:
    """(n_irrep,) +1, -1 or 0."""
    if not len(group.reversing):
        return np.ones(len(characters), dtype=np.int64)
    squares = characters[:, group.squares] * group.square_factors
    means = squares.sum(axis=1) / len(group.reversing)
    numbers = np.round(means.real)
    if np.abs(means - numbers).max() > CHARACTER_TOLERANCE or np.abs(numbers).max() > 1:
        raise IrrepError("Wigner's test for time reversal gives no whole number")
    return np.asarray(numbers, dtype=np.int64)


def _partners(group: LittleGroup, characters: ComplexArray, wigner: IntArray) -> IntArray:
    """(n_irrep,) irrep whose characters are chi(a^-1 h a)*, a the first reversing operation."""
    own = np.arange(len(characters))
    if not len(group.reversing):
        return own
    turned = (characters[:, group.conjugate] * group.conjugate_factors).conj()
    overlap = np.abs(turned @ characters.conj().T) / len(group.members)
    partners = overlap.argmax(axis=1)
    if np.abs(overlap[own, partners] - 1).max() > CHARACTER_TOLERANCE or np.any(
        (partners == own) != (wigner != 0)
    ):
        raise IrrepError("time reversal does not map the irreps onto each other")
    return np.asarray(partners)


def isotypic_projectors(irreps: tuple[Irrep, ...], operators_at_k: ComplexArray) -> ComplexArray:
    """(n_irrep, n_orb, n_orb) projectors (d/n) sum_g chi(g)* D_g(k) onto the states of each irrep.

    Parameters
    ----------
    irreps
        All irreps of the little group.
    operators_at_k
        (n, n_orb, n_orb) D_g(k) of its members, in their order.
    """
    characters = np.array([irrep.characters for irrep in irreps])
    dimensions: FloatArray = np.array([irrep.dimension for irrep in irreps], dtype=float)
    weights = characters.conj() * dimensions[:, None] / len(operators_at_k)
    return np.asarray(np.tensordot(weights, operators_at_k, axes=1))
