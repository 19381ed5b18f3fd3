"""Other readings of a declared orbital basis, to be tried on the Hamiltonian.

Projection blocks are written by hand and often read by another program than the one that made the
Hamiltonian: lines swapped, s and p of one line interchanged, atoms listed within orbitals instead
of orbitals within atoms, spin in blocks, the wrong l. Each trial says what it changes; whether it
is right is measured elsewhere.
"""

from __future__ import annotations

import itertools
import re
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from topovet.arrays import ComplexArray, FloatArray, IntArray
from topovet.model.basis import OrbitalBasis
from topovet.model.crystal import Crystal
from topovet.model.nearest_image import nearest_images
from topovet.model.real_harmonics import HARMONIC_L
from topovet.symmetry.results import InversionOperator
from topovet.symmetry.sites import SiteAssignment

MAX_BLOCKS = 4
"""Up to so many species every order of them is tried, beyond it only swaps of two."""

ON_SITE_ANG = 0.5
"""A declared position this near to a site is on it."""

PURE_BLOCK = 0.8
"""A function whose image is one function with at least this weight has a parity of its own."""


@dataclass(frozen=True, slots=True)
class Reading:
    """A changed declaration.

    Attributes
    ----------
    kind
        "site-order" (functions sit on other sites than declared, per their centres),
        "line-order" (projection lines, or orbitals within them, in another order),
        "spin-order", "orbital-order" (functions of one site interchanged), or "parity" (some are
        of another parity, hence another l).
    order
        Row i of the Hamiltonian is declared function order[i]; None where nothing is reordered.
    flipped
        Rows whose parity is the opposite of the declared one.
    """

    kind: str
    order: tuple[int, ...] | None
    flipped: tuple[int, ...] = ()


def order_readings(basis: OrbitalBasis, *, spinful: bool) -> Iterator[Reading]:
    """Other orders of the declared functions that slips of the pen produce."""
    keys = _function_keys(basis)
    blocks = _runs([key[0] for key in keys])
    n_spin = 2 if spinful else 1
    for arranged in _arrangements(blocks):
        for within in _WITHIN:
            order = [n for block in arranged for n in sorted(block, key=lambda n: within(keys[n]))]
            yield Reading("line-order", tuple(order))
    if n_spin == 2:
        in_block = np.arange(basis.n_orb).reshape(-1, 2).T.reshape(-1)
        yield Reading("spin-order", tuple(in_block.tolist()))
        yield Reading("spin-order", tuple(np.argsort(in_block).tolist()))


def site_reading(basis: OrbitalBasis, sites: SiteAssignment, crystal: Crystal) -> Reading | None:
    """The declared functions dealt out to the sites on which the centres are.

    On each site they keep their declared order. None where a site has another number of functions
    than is declared for it, or where nothing changes.
    """
    declared = sites_of_positions(basis.positions_frac, sites, crystal)
    counts = np.bincount(declared[declared >= 0], minlength=sites.n_sites)
    if (declared < 0).any() or not np.array_equal(counts, sites.counts):
        return None
    order = np.empty(basis.n_orb, dtype=np.int64)
    order[np.argsort(sites.site_of, kind="stable")] = np.argsort(declared, kind="stable")
    if np.array_equal(order, np.arange(basis.n_orb)):
        return None
    return Reading("site-order", tuple(order.tolist()))


def sites_of_positions(
    positions_frac: FloatArray, sites: SiteAssignment, crystal: Crystal
) -> IntArray:
    """(n,) site nearest to each position modulo the lattice; -1 where none is near."""
    apart = np.asarray(positions_frac)[:, None, :] - sites.positions_frac[None, :, :]
    distance = nearest_images(apart, crystal.cell)[1]
    nearest = distance.argmin(axis=1)
    off = distance[np.arange(len(nearest)), nearest] > ON_SITE_ANG
    return np.asarray(np.where(off, -1, nearest), dtype=np.int64)


def parity_readings(
    basis: OrbitalBasis,
    sites: SiteAssignment,
    inferred: InversionOperator,
    *,
    spinful: bool,
) -> Iterator[Reading]:
    """Readings that give each function the parity which the Hamiltonian says it has.

    Functions with another parity than declared are exchanged with others of their site where these
    have the parities to offer ("orbital-order"), else they are of another l ("parity"). The overall
    sign of the inferred inversion is open, so both are tried.
    """
    found = function_parities(inferred.matrix, sites)
    if found is None:
        return
    declared = declared_parities(basis)
    for sign in (1, -1):
        if np.array_equal(sign * found, declared):
            continue
        order = _reorder_by_parity(sites, sign * found, declared, 2 if spinful else 1)
        if order is not None:
            yield Reading("orbital-order", tuple(order.tolist()))
        else:
            flipped = np.flatnonzero(sign * found != declared)
            yield Reading("parity", None, tuple(flipped.tolist()))


def group_parity_readings(basis: OrbitalBasis) -> Iterator[Reading]:
    """One kind of declared function at a time, e.g. all s of one element, of the other parity."""
    keys = [(key[0], key[2]) for key in _function_keys(basis)]
    for kind in dict.fromkeys(keys):
        yield Reading("parity", None, tuple(n for n, key in enumerate(keys) if key == kind))


def function_parities(matrix: ComplexArray, sites: SiteAssignment) -> IntArray | None:
    """(n_orb,) parity of each function, +1 or -1; None where inversion mixes functions.

    The i-th function of a site must go to the i-th one of the partner site, as it does for real
    harmonics declared alike on both.
    """
    rank = np.empty(len(matrix), dtype=np.int64)
    for s in range(sites.n_sites):
        members = np.flatnonzero(sites.site_of == s)
        rank[members] = np.arange(len(members))
    image = np.abs(matrix).argmax(axis=0)
    values = matrix[image, np.arange(len(matrix))]
    if (np.abs(values) < PURE_BLOCK).any() or not np.array_equal(rank[image], rank):
        return None
    return np.asarray(np.sign(values.real), dtype=np.int64)


def declared_parities(basis: OrbitalBasis) -> IntArray:
    """(n_orb,) (-1)^l of each declared function; 0 for hybrids of even and odd l."""
    odd = (basis.harmonics**2) @ (HARMONIC_L % 2)
    return np.asarray(np.where(odd < 1e-6, 1, np.where(odd > 1 - 1e-6, -1, 0)), dtype=np.int64)


def _reorder_by_parity(
    sites: SiteAssignment, wanted: IntArray, declared: IntArray, n_spin: int
) -> IntArray | None:
    """Order in which each site's declared functions have the wanted parities, if there is one."""
    order = np.empty(len(wanted), dtype=np.int64)
    for s in range(sites.n_sites):
        rows = np.flatnonzero(sites.site_of == s)
        for first in range(n_spin):
            some = rows[first::n_spin]  # one spin component at a time
            for parity in (1, -1):
                places, offered = some[wanted[some] == parity], some[declared[some] == parity]
                if len(places) != len(offered):
                    return None
                order[places] = offered
    return order


_FunctionKey = tuple[str, str, str, int]
"""Species, site, orbital kind, position in the declaration."""

_WITHIN = (
    lambda key: key[3],
    lambda key: (_site_rank(key), _angular_rank(key), key[3]),
    lambda key: (_site_rank(key), -_angular_rank(key), key[3]),
    lambda key: (_angular_rank(key), key[3]),
    lambda key: (-_angular_rank(key), key[3]),
)
"""Orders within one element: as declared; by atom, then l rising or falling; by l, then atom."""


def _function_keys(basis: OrbitalBasis) -> list[tuple[str, str, str, int]]:
    keys = []
    leading = np.abs(basis.harmonics).argmax(axis=1)
    mixed = np.array([len(set(HARMONIC_L[np.abs(row) > 1e-6])) > 1 for row in basis.harmonics])
    for n, label in enumerate(basis.labels):
        site = label.split(" ")[0]
        kind = "hybrid" if mixed[n] else f"{HARMONIC_L[leading[n]]}"
        keys.append((re.sub(r"\d+$", "", site), site, f"{kind} {basis.shells[n]}", n))
    return keys


def _site_rank(key: _FunctionKey) -> tuple[int, str]:
    digits = re.search(r"\d+$", key[1])
    return (int(digits.group()) if digits else 0, key[1])


def _angular_rank(key: _FunctionKey) -> int:
    kind = key[2].split(" ")[0]
    return int(kind) if kind.isdigit() else 9


def _runs(species: list[str]) -> list[list[int]]:
    """Consecutive functions of one element: its projection lines."""
    return [
        [n for n, _ in run] for _, run in itertools.groupby(enumerate(species), key=lambda x: x[1])
    ]


def _arrangements(blocks: list[list[int]]) -> Iterator[list[list[int]]]:
    if len(blocks) <= MAX_BLOCKS:
        for arranged in itertools.permutations(blocks):
            yield list(arranged)
        return
    yield blocks
    for i, j in itertools.combinations(range(len(blocks)), 2):
        swapped = list(blocks)
        swapped[i], swapped[j] = swapped[j], swapped[i]
        yield swapped
