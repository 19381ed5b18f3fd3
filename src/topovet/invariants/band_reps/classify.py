"""Stable, fragile, atomic or not gapped: what the multiplicities of a set of bands say.

A vector of multiplicities that compatibility relations forbid belongs to no gapped bands. One with
a non-zero indicator cannot be made of atomic limits, not even with further ones subtracted: stable
topology, by symmetry alone. One that is a difference of atomic limits but no sum of them is
fragile. A sum of atomic limits says nothing against topology that eigenvalues do not show. Where
the sum needs orbitals at places without atoms the limit is obstructed.

References
----------
Po, Vishwanath, Watanabe, Nat. Commun. 8, 50 (2017), doi:10.1038/s41467-017-00133-2 (indicators).
Po, Watanabe, Vishwanath, Phys. Rev. Lett. 121, 126402 (2018), doi:10.1103/PhysRevLett.121.126402
(fragile). Bradlyn et al., Nature 547, 298 (2017), doi:10.1038/nature23268 (obstructed limits).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import Bounds, LinearConstraint, milp

from topovet.arrays import FloatArray, IntArray
from topovet.invariants.band_reps.levels import corep_labels, names_at
from topovet.invariants.band_reps.results import (
    ATOMIC,
    FRAGILE,
    NOT_GAPPED,
    STABLE,
    UNRESOLVED,
    AtomicLimit,
)
from topovet.model.crystal import Crystal
from topovet.notation import k_text
from topovet.symmetry.bandreps.atomic_sites import orbits_of_atoms, rows_on_atoms
from topovet.symmetry.bandreps.compatibility import Relation
from topovet.symmetry.bandreps.double_group import little_group_at
from topovet.symmetry.bandreps.indicator_group import BandRepresentation, BandRepresentations
from topovet.symmetry.bandreps.induction import SiteOrbit
from topovet.symmetry.irrep_names import name_irreps
from topovet.symmetry.irreps import compute_irreps
from topovet.symmetry.operators import SITE_TOLERANCE_ANG
from topovet.symmetry.spacegroup import name_point_group

SEARCH_SECONDS = 1.0
"""Time for one search for non-negative combinations; they take milliseconds."""

INFEASIBLE = 2
"""Status of scipy's milp where it has shown that there is no solution."""

MOST_CROSSINGS = 6
"""Lines with enforced crossings that are listed."""


@dataclass(frozen=True, slots=True, eq=False)
class Limits:
    """Orbitals that atomic limits are looked for among.

    Attributes
    ----------
    orbits, rows
        Wyckoff positions and their band representations; `row.orbit` counts in `orbits`.
    places
        One site of each, fractional.
    atoms
        Whether atoms sit on each of the positions.
    """

    orbits: tuple[SiteOrbit, ...]
    rows: tuple[BandRepresentation, ...]
    places: tuple[FloatArray, ...]
    atoms: tuple[bool, ...]


@dataclass(frozen=True, slots=True)
class Classified:
    """Fields as in `BandSet`."""

    classification: str
    reason: str
    indicator: tuple[int, ...] | None
    atomic_limits: tuple[AtomicLimit, ...] = ()
    obstructed: bool | None = None
    crossings: tuple[str, ...] = ()


class Classifier:
    """Classifies sets of bands of one crystal.

    Parameters
    ----------
    found
        Band representations of the group.
    crystal
        Gives the atoms; without any, nothing is called obstructed.
    """

    def __init__(self, found: BandRepresentations, crystal: Crystal) -> None:
        self._found = found
        atoms = orbits_of_atoms(found, crystal.positions_frac, SITE_TOLERANCE_ANG)
        self._atoms = Limits(
            orbits=tuple(a.orbit for a in atoms),
            rows=rows_on_atoms(found, atoms),
            places=tuple(a.position_frac for a in atoms),
            atoms=(True,) * len(atoms),
        )
        taken = [a.orbit.stratum for a in atoms]
        self._all = Limits(
            orbits=found.orbits,
            rows=found.rows,
            places=tuple(o.sites_frac[0] for o in found.orbits),
            atoms=tuple(any(o.stratum is s for s in taken) for o in found.orbits),
        )

    def classify(self, vector: IntArray) -> Classified:
        """The class of a set of bands with these multiplicities."""
        indicator = self._found.indicator(vector)
        if indicator is None:
            crossings = tuple(dict.fromkeys(self._crossing_texts(vector)))
            reason = "compatibility relations force bands of the set to meet others"
            return Classified(NOT_GAPPED, reason, None, crossings=crossings[:MOST_CROSSINGS])
        if any(indicator):
            return Classified(STABLE, "", indicator)
        on_atoms = self._search_simply(self._atoms, vector) if self._atoms.rows else None
        if isinstance(on_atoms, tuple):
            return Classified(ATOMIC, "", indicator, on_atoms, obstructed=False)
        anywhere = self._search_simply(self._all, vector)
        if anywhere is None:
            return Classified(FRAGILE, "", indicator)
        if isinstance(anywhere, str):
            return Classified(UNRESOLVED, anywhere, indicator)
        settled = bool(self._atoms.rows) and on_atoms is None
        return Classified(ATOMIC, "", indicator, anywhere, obstructed=True if settled else None)

    def _search_simply(
        self, limits: Limits, vector: IntArray
    ) -> tuple[AtomicLimit, ...] | str | None:
        """As `_search`, with orbitals of a single position where those of one will do."""
        for position in range(len(limits.orbits)):
            rows = tuple(row for row in limits.rows if row.orbit == position)
            found = self._search(replace(limits, rows=rows), vector)
            if isinstance(found, tuple):
                return found
        return self._search(limits, vector)

    def _search(self, limits: Limits, vector: IntArray) -> tuple[AtomicLimit, ...] | str | None:
        """A sum of band representations; None if there is none; a sentence if not settled."""
        matrix = np.array([row.multiplicities for row in limits.rows])
        answer = milp(
            c=np.ones(len(matrix)),
            constraints=LinearConstraint(matrix.T.astype(float), vector, vector),
            bounds=Bounds(0, np.inf),
            integrality=np.ones(len(matrix)),
            options={"time_limit": SEARCH_SECONDS},
        )
        if answer.status == INFEASIBLE:
            return None
        if answer.x is None:
            return "the search for a sum of atomic limits did not end in time"
        copies = np.round(answer.x).astype(np.int64)
        if (copies @ matrix != vector).any():
            return "the search for a sum of atomic limits gave no exact answer"
        return tuple(
            _describe(limits, limits.rows[i], int(copies[i])) for i in np.flatnonzero(copies)
        )

    def _crossing_texts(self, vector: IntArray) -> list[str]:
        violated = sorted(self._found.violated(vector), key=lambda r: len(r.operations))
        return [_crossing_text(self._found, relation, vector) for relation in reversed(violated)]


def _describe(limits: Limits, row: BandRepresentation, copies: int) -> AtomicLimit:
    orbit = limits.orbits[row.orbit]
    names = names_at(orbit.table, "")
    x, y, z = (float(c) for c in limits.places[row.orbit])
    return AtomicLimit(
        site=(x, y, z),
        n_sites=orbit.multiplicity,
        site_symmetry=name_point_group(orbit.table.group.rotations),
        orbital=corep_labels(orbit.table, names)[row.corep],
        n_bands=row.n_bands,
        copies=copies,
        on_atoms=limits.atoms[row.orbit],
    )


def _crossing_text(found: BandRepresentations, relation: Relation, vector: IntArray) -> str:
    """ "from (0, 0, 0) to (0, 0, ½): 1a twice less, 1b twice more"."""
    k = (relation.k_start + relation.k_end) / 2
    group = little_group_at(found.group, k, relation.operations)
    irreps = compute_irreps(group)
    names = name_irreps(group, irreps, "")
    phases = np.exp(-2j * np.pi * (found.group.translations[group.members] @ k))
    traces = (relation.coefficients @ vector) * phases
    characters = np.array([irrep.characters for irrep in irreps])
    changes = np.round((characters.conj() @ traces).real / len(group.members)).astype(int)
    parts = [
        f"{abs(change)} {name.label or 'levels'} {'more' if change > 0 else 'fewer'}"
        for name, change in zip(names, changes.tolist(), strict=True)
        if change
    ]
    start, end = k_text(relation.k_start.tolist()), k_text(relation.k_end.tolist())
    return f"from {start} to {end}: {', '.join(parts)}"
