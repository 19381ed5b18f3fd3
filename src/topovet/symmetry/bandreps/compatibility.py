"""Compatibility relations: what bands at one k say about bands at another.

On a flat of k whose points are all fixed by the operations h of a group H, bands of a gapped set
carry the same representation of H all over it. In the periodic gauge the matrices are
D_h(k) = exp(-2 pi i k.w_h) times something that is constant for a constant h k - k, so that

    exp(2 pi i k.w_h) tr D_h(k)    is the same for all k of the flat, k not reduced modulo lattice.

Each maximal stratum that touches the flat gives one value for each h, linear in its
multiplicities; all must agree, also with themselves a lattice vector along the flat further on (a
screw permutes its irreps there). The group of all k gives the one relation that the number of
bands is everywhere the same.

References
----------
Bouckaert, Smoluchowski, Wigner, Phys. Rev. 50, 58 (1936), doi:10.1103/PhysRev.50.58.
Po, Vishwanath, Watanabe, Nat. Commun. 8, 50 (2017), doi:10.1038/s41467-017-00133-2.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray, frozen
from topovet.symmetry.bandreps.corepresentations import CorepTable
from topovet.symmetry.bandreps.double_group import DoubleGroup
from topovet.symmetry.bandreps.strata import Stratum, Torus

RANK_TOLERANCE = 1e-7
"""Singular values of relations, whose coefficients are of order 1, that count as zero."""


@dataclass(frozen=True, slots=True, eq=False)
class Relation:
    """Multiplicities that must agree between two k on one flat.

    Attributes
    ----------
    start, end
        Positions of the two maximal strata; equal for a stratum and one of its own images.
    k_start, k_end
        (3,) fractional, with a straight line between them on the flat.
    dimension
        Of the flat: 1 for a line, 2 for a plane, 3 for all k.
    fixing
        All operations that fix the flat, time reversal included.
    operations
        (n_h,) the unitary ones among them.
    coefficients
        (n_h, n_column) on the vector of multiplicities: trace at the end minus trace at the start.
    """

    start: int
    end: int
    k_start: FloatArray
    k_end: FloatArray
    dimension: int
    fixing: IntArray
    operations: IntArray
    coefficients: ComplexArray

    def violation(self, multiplicities: IntArray) -> float:
        """Largest difference of traces; 0 for bands that can be connected without a crossing."""
        return float(np.abs(self.coefficients @ multiplicities).max(initial=0.0))


@dataclass(frozen=True, slots=True, eq=False)
class Arm:
    """One image of a maximal stratum.

    Attributes
    ----------
    position
        Of the stratum.
    point
        (3,) integers over the denominator of the zone.
    traces
        (n, n_corep) of the operations that fix it, 0 elsewhere.
    """

    position: int
    point: IntArray
    traces: ComplexArray


def find_relations(
    group: DoubleGroup, torus: Torus, strata: Sequence[Stratum], tables: Sequence[CorepTable]
) -> tuple[Relation, ...]:
    """All relations between the maximal strata of the Brillouin zone.

    Parameters
    ----------
    torus
        The zone.
    strata
        All strata of it; `tables` belongs to the maximal ones in their order.
    """
    maximal = [s for s in strata if s.maximal]
    starts = np.cumsum([0, *(len(t.coreps) for t in tables)])
    arms = [arm for _, arm in arms_of(group, torus, maximal, tables)]
    return tuple(
        relation
        for flat in strata
        if flat.dimension
        for relation in _relations_on(group, flat, arms, starts)
    )


def relation_rank(relations: Sequence[Relation]) -> int:
    """Number of independent relations."""
    rows = np.concatenate([r.coefficients for r in relations])
    distinct = np.unique(np.round(np.concatenate([rows.real, rows.imag]), 9), axis=0)
    values = np.linalg.svd(distinct, compute_uv=False)
    return int((values > RANK_TOLERANCE).sum())


def arms_of(
    group: DoubleGroup, torus: Torus, maximal: Sequence[Stratum], tables: Sequence[CorepTable]
) -> Iterator[tuple[int, Arm]]:
    """All images of the maximal strata, with the position of each in their order."""
    for i, (stratum, table) in enumerate(zip(maximal, tables, strict=True)):
        for arm in _arms(group, torus, i, stratum, table):
            yield i, arm


def _arms(
    group: DoubleGroup, torus: Torus, position: int, stratum: Stratum, table: CorepTable
) -> Iterator[Arm]:
    images = torus.images(stratum.point) % torus.denominator
    _, first = np.unique(images, axis=0, return_index=True)
    for g in np.sort(first):
        yield Arm(position, images[g], _traces_at_image(group, int(g), images[g], stratum, table))


def _traces_at_image(
    group: DoubleGroup, g: int, image: IntArray, stratum: Stratum, table: CorepTable
) -> ComplexArray:
    """(n, n_corep) traces of D_h(k'), k' = g k: h g = g l up to sign and translation.

    D_h(k') = s s' exp(-2 pi i k'.(t - t')) D_g D_l(k) D_g^-1 with h g = s {1|t} c, g l = s' {1|t'}
    c. Time reversal after g conjugates the traces and turns k' over.
    """
    turned = g >= group.n
    g %= group.n
    members = table.group.members
    c = group.product[g, members]
    # h with h g = c: position of c in column g of the table
    h = np.argsort(group.product[:, g])[c]
    cells = group.cells[h, g] - group.cells[g, members]
    signs = group.signs[h, g] * group.signs[g, members]
    k_image = (-image if turned else image) / stratum.denominator
    phases = signs * np.exp(-2j * np.pi * (cells @ k_image))
    traces = np.zeros((group.n, len(table.coreps)), dtype=np.complex128)
    traces[h] = (table.characters * phases).T
    return traces.conj() if turned else traces


def _relations_on(
    group: DoubleGroup, flat: Stratum, arms: Sequence[Arm], starts: IntArray
) -> Iterator[Relation]:
    """Relations of one flat: every arm on it against the first, and the first against itself."""
    operations = flat.stabiliser[flat.stabiliser < group.n]
    on_flat = [(arm, lift) for arm in arms if (lift := flat.lift(arm.point)) is not None]
    shifts = group.translations[operations]

    def value(arm: Arm, k: FloatArray) -> ComplexArray:
        row = np.zeros((len(operations), int(starts[-1])), dtype=np.complex128)
        columns = slice(starts[arm.position], starts[arm.position + 1])
        row[:, columns] = arm.traces[operations] * np.exp(2j * np.pi * (shifts @ k))[:, None]
        return row

    first, lift = on_flat[0]
    k_first = first.point / flat.denominator + lift
    others = [(arm, arm.point / flat.denominator + lift) for arm, lift in on_flat[1:]]
    others += [(first, k_first + direction) for direction in flat.directions.T]
    for arm, k in others:
        difference = value(arm, k) - value(first, k_first)
        if np.abs(difference).max() > RANK_TOLERANCE:
            yield Relation(
                start=first.position,
                end=arm.position,
                k_start=frozen(np.asarray(k_first)),
                k_end=frozen(np.asarray(k)),
                dimension=flat.dimension,
                fixing=flat.stabiliser,
                operations=operations,
                coefficients=frozen(difference),
            )
