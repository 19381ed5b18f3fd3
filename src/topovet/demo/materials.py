"""Models in plausible crystals: lattice constants, symbols and energies as a compound has them.

The crystals are invented; each keeps the symmetries of its model and no more.
"""

from __future__ import annotations

import numpy as np

from topovet.arrays import ComplexArray
from topovet.demo.changes import in_crystal, in_ev, staggered, with_sites
from topovet.demo.crystal_models import atomic_insulator, fu_kane_mele, layered_bhz
from topovet.demo.dirac_models import double_wilson_dirac, wilson_dirac
from topovet.demo.lattice import LatticeModel, honeycomb_cell, with_hops

CUBIC = (4, 4, 4)
"""Mesh of the three-dimensional compounds."""

LAYER = (6, 6, 1)
"""Mesh of the two-dimensional ones."""

BODY_CENTRE = (0.5, 0.5, 0.5)


def cubic(model: LatticeModel, cation: str, anion: str, a: float) -> LatticeModel:
    """s and p of the cation in a CsCl structure; the anion's shell is far below, left out."""
    crystal = in_crystal(model, [cation], a * np.eye(3), beside=[(anion, BODY_CENTRE)])
    return in_ev(crystal, 0.35, 5.2)


def strong() -> LatticeModel:
    return cubic(wilson_dirac(m=-2.0), "In", "I", 4.35)


def weak() -> LatticeModel:
    return cubic(wilson_dirac(m=0.0), "Bi", "Br", 4.6)


def bonded(symbols: tuple[str, str], dt: float, v: float = 0.0) -> LatticeModel:
    """The diamond lattice with one bond shortened along its axis where it is stronger."""
    model = staggered(fu_kane_mele(dt=(dt, 0.0, 0.0, 0.0)), v)
    u = 0.24 if dt else 0.25
    moved = with_sites(model, np.array([[0.0, 0, 0], [u, u, u]]), (u / 2, u / 2, u / 2))
    return in_ev(in_crystal(moved, symbols, 6.6 / 5.43 * model.crystal.cell), 0.5, 4.1)


def film(model: LatticeModel, symbol: str, anion: str) -> LatticeModel:
    """A square layer: the model's site, and an atom without orbitals in the middle."""
    beside = [(anion, (0.5, 0.5, 0.0))]
    return in_ev(in_crystal(model, [symbol], np.diag([4.4, 4.4, 20.0]), beside=beside), 0.3, 3.3)


def honeycomb(model: LatticeModel, symbols: tuple[str, str]) -> LatticeModel:
    return in_ev(in_crystal(model, symbols, honeycomb_cell(4.7)), 0.9, -2.4)


def ionic(*, spinful: bool = True) -> LatticeModel:
    return in_ev(atomic_insulator(spinful=spinful), 0.5, 2.0)


def layered() -> LatticeModel:
    beside = [("Cl", BODY_CENTRE)]
    layers = in_crystal(layered_bhz(), ["Pb"], np.diag([4.4, 4.4, 5.6]), beside=beside)
    return in_ev(layers, 0.3, 4.4)


def two_inversions() -> LatticeModel:
    """Two inverted pairs of bands in a triclinic crystal with nothing but inversion.

    Hopping along two diagonals and a pair of atoms in general position take away the mirrors and
    rotations of the model, which would protect surface states of their own.
    """
    model = double_wilson_dirac()
    unit: ComplexArray = np.eye(model.n_orb).astype(np.complex128)
    skewed = with_hops(
        model, {(1, 1, 0): np.asarray(0.06 * unit), (0, 1, 1): np.asarray(-0.09 * unit)}
    )
    pair = [("O", (0.27, 0.41, 0.13)), ("O", (0.73, 0.59, 0.87))]
    cell = np.array([[4.3, 0.0, 0.0], [0.15, 4.4, 0.0], [0.22, 0.1, 4.5]])
    return in_ev(in_crystal(skewed, ["Te"], cell, beside=pair), 0.35, 5.2)
