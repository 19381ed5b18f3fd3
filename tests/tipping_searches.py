"""Tipping points of lattice models, as the task would look for them."""

from __future__ import annotations

import numpy as np

from lattice_models import LatticeModel
from topovet.invariants.tipping.by_gap import GapGround
from topovet.invariants.tipping.by_parity import TrimGround, trim_stars
from topovet.invariants.tipping.results import TippingPoint
from topovet.invariants.tipping.search import (
    Parameter,
    choose_parameters,
    search_by_gap,
    search_by_parity,
)
from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.model.orbital_groups import declared_groups
from topovet.model.spin_parts import spin_frame, spin_purity
from topovet.symmetry.inversion import build_inversion, inversion_at
from topovet.symmetry.trim import trim_points

Points = dict[tuple[str, str], TippingPoint]
"""By name of the group ("" for the scale) and direction."""


def parameters_of(model: LatticeModel, coupling: BlochSum | None = None) -> list[Parameter]:
    """Everything that can be turned in a model; the scale by a coupling of its own if given."""
    apart = model.basis.positions_frac[:, None] - model.basis.positions_frac[None]
    same_site = np.abs(apart).max(axis=2) < 1e-6
    purity = spin_purity(model.tight_binding(), same_site, spin_frame(model.basis))
    return choose_parameters(declared_groups(model.basis), purity, coupling)[0]


def by_parity(model: LatticeModel, coupling: BlochSum | None = None) -> Points:
    """Both directions of every parameter, by parity about the model's centre."""
    k_trim = trim_points(model.crystal.periodic)
    operator = build_inversion(model.basis, model.crystal, np.array(model.centre))
    ground = TrimGround(
        k_trim,
        build_bloch_sum(model.tight_binding()).at(k_trim),
        inversion_at(operator, k_trim),
        trim_stars(k_trim, np.eye(3, dtype=int)[None]),
        model.filling,
        model.crystal.periodic,
    )
    frame = spin_frame(model.basis)
    points, _, _ = search_by_parity(ground, parameters_of(model, coupling), frame)
    return {(p.group, p.direction): p for p in points}


def by_gap(model: LatticeModel, z2: tuple[int, ...], known: tuple[float, float, float]) -> Points:
    """Both directions of every parameter, along the gap."""
    bloch = build_bloch_sum(model.tight_binding())
    ground = GapGround(bloch, model.filling, model.crystal.periodic, z2, np.array([known]))
    frame = spin_frame(model.basis)
    points, _, _ = search_by_gap(
        ground, parameters_of(model), frame, most_groups=None, max_solves=20_000
    )
    return {(p.group, p.direction): p for p in points}
