"""Changes of a model that give it another energy scale, another crystal or less symmetry."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.demo.lattice import LatticeModel, Vector, with_onsite


def in_ev(model: LatticeModel, hopping_ev: float, zero_ev: float = 0.0) -> LatticeModel:
    """Energies in units of a hopping, counted from another zero."""
    zero = zero_ev * np.eye(model.n_orb)
    return with_onsite(replace(model, h_r=model.h_r * hopping_ev), zero)


def in_crystal(
    model: LatticeModel,
    symbols: Sequence[str],
    cell: FloatArray | None = None,
    *,
    beside: Sequence[tuple[str, Vector]] = (),
) -> LatticeModel:
    """The model's sites under other symbols, in another cell, with atoms that carry no orbitals.

    Whoever adds atoms or changes the cell sees to it that the symmetries of the model stay.
    """
    crystal = model.crystal
    places = [crystal.positions_frac, *(np.array([place]) for _, place in beside)]
    changed = replace(
        crystal,
        cell=crystal.cell if cell is None else cell,
        symbols=(*symbols, *(symbol for symbol, _ in beside)),
        positions_frac=np.concatenate(places),
    )
    return replace(model, crystal=changed)


def with_sites(model: LatticeModel, sites_frac: FloatArray, centre: Vector) -> LatticeModel:
    """Sites of two atoms with equally many orbitals moved, hoppings as they are."""
    repeats = model.n_orb // len(sites_frac)
    return replace(
        model,
        crystal=replace(model.crystal, positions_frac=sites_frac),
        basis=replace(model.basis, positions_frac=np.repeat(sites_frac, repeats, axis=0)),
        centre=centre,
    )


def staggered(model: LatticeModel, v: float) -> LatticeModel:
    """A potential +v, -v on the two sites of a four-band model: breaks inversion A <-> B."""
    changed = with_onsite(model, np.diag([v, v, -v, -v]))
    return replace(changed, name=f"staggered_{model.name}")
