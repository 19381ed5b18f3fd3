"""Which points the Hamiltonian is inversion-symmetric about, whatever the structure file says.

An inversion takes a chosen site to one with as many functions, so its centre is half-way between
the two: the candidates are few and complete. Centres that differ by half a lattice vector are one
and the same test, because the Hamiltonian is periodic.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.errors import NoInversionError
from topovet.model.crystal import Crystal
from topovet.model.hamiltonian import TightBindingModel
from topovet.model.nearest_image import nearest_images
from topovet.symmetry.inference import ATOM_MATCH_ANG, InferredInversion, infer_inversion
from topovet.symmetry.inversion_blocks import invert_sites
from topovet.symmetry.sites import SiteAssignment

_ORDER = {"good": 0, "doubtful": 1, "refused": 2}


@dataclass(frozen=True, slots=True, eq=False)
class CentreTrial:
    """Inversion inferred about one point.

    Attributes
    ----------
    inferred
        The result; its structure check is left out, the sites alone decide.
    shift_frac
        (3,) shortest vector to the point from an inversion centre of the structure, modulo half
        lattice vectors; None where the structure has none.
    shift_ang
        Its length, 0 to rounding where the structure agrees.
    """

    inferred: InferredInversion
    shift_frac: FloatArray | None
    shift_ang: float | None

    @property
    def in_structure(self) -> bool:
        """Whether the structure has this centre too."""
        return self.shift_ang is not None and self.shift_ang <= ATOM_MATCH_ANG


def search_centres(
    model: TightBindingModel,
    crystal: Crystal,
    sites: SiteAssignment,
    structure_centres: FloatArray,
    *,
    spinful: bool,
) -> tuple[CentreTrial, ...]:
    """Inference about every point that the sites allow, the best first.

    Parameters
    ----------
    model, crystal, sites, spinful
        As in `infer_inversion`; atoms are not consulted.
    structure_centres
        (n, 3) inversion centres of the structure, fractional; (0, 3) where it has none.

    Returns
    -------
    tuple
        Empty where the sites are closed under no inversion at all.
    """
    bare = replace(crystal, symbols=(), positions_frac=np.zeros((0, 3)))
    trials = []
    for centre in candidate_centres(sites, crystal):
        inferred = infer_inversion(model, bare, sites, centre, spinful=spinful)
        trials.append(CentreTrial(inferred, *centre_shift(centre, structure_centres, crystal)))
    return tuple(sorted(trials, key=_rank))


def candidate_centres(sites: SiteAssignment, crystal: Crystal) -> FloatArray:
    """(n, 3) points about which the sites are closed under inversion, modulo half vectors."""
    counts = sites.counts
    sizes, members = np.unique(counts, return_counts=True)
    alike = np.flatnonzero(counts == sizes[members.argmin()])
    found = []
    for other in alike:
        centre = (sites.positions_frac[alike[0]] + sites.positions_frac[other]) / 2
        centre = np.where(np.array(crystal.periodic), centre % 0.5, centre)
        try:
            invert_sites(sites, crystal, centre)
        except NoInversionError:
            continue
        found.append(np.where(np.abs(centre - 0.5) < 1e-9, 0.0, centre))
    return np.array(found).reshape(-1, 3)


def centre_shift(
    centre_frac: FloatArray, structure_centres: FloatArray, crystal: Crystal
) -> tuple[FloatArray | None, float | None]:
    """Shortest way (frac, angstrom) from the structure's inversion centres, modulo half vectors."""
    if not len(structure_centres):
        return None, None
    # halves of lattice vectors are the lattice of the halved cell
    apart = 2 * (np.asarray(centre_frac) - np.asarray(structure_centres))
    lattice, distance = nearest_images(apart, crystal.cell / 2)
    best = int(distance.argmin())
    return (apart - lattice)[best] / 2, float(distance[best])


def _rank(trial: CentreTrial) -> tuple[int, float]:
    misfit = trial.inferred.misfit
    return _ORDER[trial.inferred.reliability], np.inf if misfit is None else misfit
