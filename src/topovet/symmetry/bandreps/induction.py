"""Band representations: what orbitals on a site become all over the Brillouin zone.

Orbitals that span a corepresentation rho of the site-symmetry group of x_0 are copied to the sites
x_a = g_a x_0 of its orbit. In the periodic gauge an operation h of the little group of k has there

    chi_k(h) = sum_a' exp(-2 pi i k.L_a) chi_rho(e_a),    h g_a = {1|L_a} g_a e_a,

the sum over the sites that h maps onto themselves modulo the lattice, h x_a = x_a + L_a, with e_a
in the site-symmetry group and the sign that the table gives. Band representations induced from
maximal Wyckoff positions span all others.

References
----------
Zak, Phys. Rev. B 26, 3010 (1982), doi:10.1103/PhysRevB.26.3010.
Bradlyn, Elcoro, Cano, Vergniory, Wang, Felser, Aroyo, Bernevig, Nature 547, 298 (2017),
doi:10.1038/nature23268.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray, frozen
from topovet.symmetry.bandreps.corepresentations import CorepTable, find_coreps
from topovet.symmetry.bandreps.double_group import DoubleGroup, site_group_of
from topovet.symmetry.bandreps.strata import Stratum, Torus, generic_point


@dataclass(frozen=True, slots=True, eq=False)
class SiteOrbit:
    """A Wyckoff position with all its sites in one cell.

    Attributes
    ----------
    stratum
        Where it is; coordinates about the origin of the double group.
    table
        Corepresentations of the site-symmetry group of the first site.
    sites_frac
        (m, 3) all sites, in the fractional coordinates of the input cell, modulo 1.
    crossings
        (n, m, 3) integer L_a of each operation; only where it maps the site onto itself.
    traces
        (n_corep, n, m) chi_rho(e_a), 0 where an operation moves the site to another.
    """

    stratum: Stratum
    table: CorepTable
    sites_frac: FloatArray
    crossings: IntArray
    traces: ComplexArray

    @property
    def multiplicity(self) -> int:
        """Sites in one cell."""
        return len(self.sites_frac)

    def characters(self, members: IntArray, k_frac: FloatArray) -> ComplexArray:
        """(n_corep, n_member) characters at k of the band representations of all coreps."""
        phases = np.exp(-2j * np.pi * (self.crossings[members] @ np.asarray(k_frac)))
        return np.asarray((self.traces[:, members] * phases).sum(axis=2))


def place_on_orbit(group: DoubleGroup, torus: Torus, stratum: Stratum) -> SiteOrbit:
    """A Wyckoff position and the traces of its orbitals.

    Parameters
    ----------
    torus
        The unit cell under the group.
    stratum
        One of its strata.
    """
    torus, point = generic_point(torus, stratum)
    q = torus.denominator
    images = torus.images(point)
    _, first = np.unique(images % q, axis=0, return_index=True)
    first = np.sort(first)
    sites = images[first]
    moved = torus.images(sites) - sites
    stays = np.all(moved % q == 0, axis=2)
    table = find_coreps(site_group_of(group, stratum.stabiliser))
    inner, signs = _inner_elements(group, first)
    of_element = np.zeros((len(table.coreps), group.n), dtype=np.complex128)
    of_element[:, table.group.members] = table.characters
    traces = np.where(stays, of_element[:, inner] * signs, 0.0)
    return SiteOrbit(
        stratum=stratum,
        table=table,
        sites_frac=frozen(_fold(sites / q + group.origin)),
        crossings=frozen(np.where(stays[:, :, None], moved // q, 0)),
        traces=frozen(traces),
    )


def _inner_elements(group: DoubleGroup, first: IntArray) -> tuple[IntArray, IntArray]:
    """(n, m) operation e with h g_a ~ g_a e, and the sign left over."""
    through = group.product[:, first]
    inner = group.inverse_product[first[None, :], through]
    signs = group.signs[:, first] * group.signs[first[None, :], inner]
    return inner, signs


def _fold(points: FloatArray) -> FloatArray:
    """Into [0, 1), with rounding errors at 1 folded too."""
    folded = np.round(points % 1.0, 9) % 1.0
    return np.asarray(folded)
