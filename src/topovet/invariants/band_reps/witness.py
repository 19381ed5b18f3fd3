"""Band representations as a witness: what the symmetry of the occupied bands alone says."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import IntArray
from topovet.invariants.band_reps.classify import Classifier
from topovet.invariants.band_reps.levels import Levels, read_levels
from topovet.invariants.band_reps.lines import connect_levels
from topovet.invariants.band_reps.results import NOT_GAPPED, UNRESOLVED, BandRepWitness, BandSet
from topovet.invariants.band_reps.z2 import (
    Z2,
    ContradictionError,
    nothing_known,
    z2_from_levels,
)
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.bandreps.indicator_group import (
    BandRepresentations,
    compute_band_representations,
)
from topovet.symmetry.bandreps.layers import Layer
from topovet.symmetry.operators import WannierOperator

MOST_SETS = 40
"""Isolated sets of bands that are looked at, the lowest first."""


@dataclass(frozen=True, slots=True, eq=False)
class GroupInUse:
    """The operations that the bands are sorted by.

    Attributes
    ----------
    operators
        The unitary operations on the Wannier functions, a group modulo lattice translations.
    name
        Number and symbol.
    n_structure
        Operations of the structure's group.
    time_reversal, spinful
        Whether Theta is in the group; double-valued representations.
    layer
        Where the layer lies whose operations these are; None for a crystal.
    """

    operators: tuple[WannierOperator, ...]
    name: str
    n_structure: int
    time_reversal: bool
    spinful: bool
    layer: Layer | None = None


def compute_band_rep_witness(
    bloch: BlochSum,
    group: GroupInUse,
    crystal: Crystal,
    filling: int,
    gaps: Sequence[int] = (),
) -> BandRepWitness:
    """Multiplicities, indicator and class of the occupied bands and of other isolated sets.

    Parameters
    ----------
    bloch
        The Hamiltonian of a crystal or a layer.
    group
        Its group.
    crystal
        Cell and atoms.
    filling
        Occupied bands, spin counted.
    gaps
        Numbers of bands below other gaps that may be open; those that compatibility relations
        close are left out.
    """
    found = compute_band_representations(
        crystal.cell,
        np.array([o.rotation for o in group.operators]),
        np.array([o.translation for o in group.operators]),
        spinful=group.spinful,
        time_reversal=group.time_reversal,
        layer=group.layer,
    )
    edges = sorted({n for n in gaps if 0 < n < bloch.n_orb} | {filling})[:MOST_SETS]
    with one_blas_thread():
        levels = read_levels(found, bloch, group.operators, crystal, sorted({*edges, filling}))
    judge = _Judge(found, levels, Classifier(found, crystal))
    occupied = judge.band_set(0, filling)
    kept = [n for n in edges if n == filling or judge.stays_open(n)]
    sets = [judge.band_set(a, b) for a, b in itertools.pairwise([0, *kept])]
    failed = occupied.classification == UNRESOLVED
    vector = levels.readings[filling].vector
    gapped = occupied.classification != NOT_GAPPED
    return BandRepWitness(
        status="failed" if failed else "ok",
        reason=occupied.reason if failed else "",
        group=group.name,
        spinful=group.spinful,
        n_operations=len(group.operators),
        n_structure=group.n_structure,
        indicator_group=found.indicator_group,
        n_band_representations=len(found.rows),
        points=levels.points,
        occupied=occupied,
        lines=connect_levels(found, levels.points, vector) if vector is not None and gapped else (),
        sets=tuple(sets) if len(sets) > 1 else (),
        dimension=3 if group.layer is None else 2,
        below=tuple(judge.band_set(0, n) for n in kept if n < filling),
    )


@dataclass(frozen=True, slots=True, eq=False)
class _Judge:
    found: BandRepresentations
    levels: Levels
    classifier: Classifier

    def stays_open(self, n: int) -> bool:
        """Whether symmetry lets a gap above the lowest n bands stay open at every k."""
        vector = self.levels.readings[n].vector
        return vector is not None and self.found.indicator(vector) is not None

    def band_set(self, first: int, last: int) -> BandSet:
        """The bands first … last - 1."""
        upper = self.levels.readings[last]
        lower = self.levels.readings.get(first)
        reason = upper.reason or (lower.reason if lower is not None else "")
        if upper.vector is None or (lower is not None and lower.vector is None):
            return self._unresolved(first, last, reason)
        vector = upper.vector
        purity = upper.purity
        if lower is not None and lower.vector is not None:
            vector, purity = vector - lower.vector, min(purity, lower.purity)
        if (vector < 0).any():
            return self._unresolved(first, last, "the levels of two gaps do not fit together")
        return self._classified(first, last, vector, purity)

    def _classified(self, first: int, last: int, vector: IntArray, purity: float) -> BandSet:
        answer = self.classifier.classify(vector)
        z2: Z2 = nothing_known(self.found)
        classification, reason = answer.classification, answer.reason
        if classification not in (NOT_GAPPED, UNRESOLVED):
            try:
                z2 = z2_from_levels(self.found, vector)
            except ContradictionError as error:
                classification, reason = UNRESOLVED, str(error)
        return BandSet(
            first_band=first,
            n_bands=last - first,
            classification=classification,
            reason=reason,
            indicator=answer.indicator,
            multiplicities=self._by_point(vector),
            atomic_limits=answer.atomic_limits,
            obstructed=answer.obstructed,
            crossings=answer.crossings,
            z2=z2,
            purity=purity,
        )

    def _by_point(self, vector: IntArray) -> tuple[tuple[int, ...], ...]:
        starts = self.found.starts.tolist()
        return tuple(tuple(vector[a:b].tolist()) for a, b in itertools.pairwise(starts))

    def _unresolved(self, first: int, last: int, reason: str) -> BandSet:
        return BandSet(
            first_band=first,
            n_bands=last - first,
            classification=UNRESOLVED,
            reason=reason,
            indicator=None,
            multiplicities=(),
            atomic_limits=(),
            obstructed=None,
            crossings=(),
            z2=nothing_known(self.found),
            purity=None,
        )
