"""Point nodes one by one: charge, dispersion, and what holds them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.invariants.nodes.flux import (
    loop_berry_phase,
    nearest_quantised,
    node_flux,
    surface_shape,
)
from topovet.invariants.nodes.protection import (
    axis_protection,
    enforced_level,
    quantising_operation,
)
from topovet.invariants.nodes.results import PointNode, Reference, Vector
from topovet.model.crystal import Crystal
from topovet.model.fourier import BlochSum
from topovet.spectrum.closings.distinct import between
from topovet.spectrum.closings.local import Touching, describe_touching
from topovet.symmetry.operators import WannierOperator

LARGEST_RADIUS = 0.12
"""Largest surface around a node, as a part of the shortest reciprocal vector."""

SHARE_OF_DISTANCE = 0.42
"""And as a part of the distance to the nearest other closing, its own images included."""

FLATTEST = (6.0, 500.0)
"""Ratio of half-axes up to which the surface follows the cone; a second, longer look where the
first settles nothing (nodes about to merge are that flat)."""


@dataclass(frozen=True, slots=True, eq=False)
class Case:
    """What the nodes belong to.

    Attributes
    ----------
    bloch, crystal, filling
        The Hamiltonian, its cell, and the number of bands below the nodes.
    operators
        Its own group, antiunitary operations included; empty if unknown.
    spinful
        Whether the states carry spin.
    reference
        The energy that nodes are measured from.
    """

    bloch: BlochSum
    crystal: Crystal
    filling: int
    operators: Sequence[WannierOperator]
    spinful: bool
    reference: Reference


def describe_points(
    case: Case, orbits: Sequence[FloatArray], others: FloatArray
) -> tuple[PointNode, ...]:
    """All nodes, by orbit.

    The charge is found anew at every node of an orbit: that the charges add up to zero is then a
    test. What holds a node is found at the first of each orbit.

    Parameters
    ----------
    orbits
        (n, 3) fractional each: images of one node.
    others
        (n, 3) points of nodal lines, images included.
    """
    everything = np.concatenate([*orbits, others])
    nodes: list[PointNode] = []
    for number, orbit in enumerate(orbits):
        protection: str | None = None
        for k in orbit:
            touching = describe_touching(case.bloch, k, case.filling, case.crystal.reciprocal)
            radius = _radius(case.crystal, k, everything)
            node = _describe(case, number, touching, radius, protection)
            protection = node.protection
            nodes.append(node)
    return tuple(nodes)


def _radius(crystal: Crystal, k_frac: FloatArray, everything: FloatArray) -> float:
    """Largest radius at which a surface encloses this node alone, 1/angstrom."""
    away = np.linalg.norm(between(everything, k_frac) @ crystal.reciprocal, axis=1)
    unit = np.linalg.norm(crystal.reciprocal[list(crystal.periodic)], axis=1).min()
    nearest = away[away > 1e-7 * unit].min(initial=np.inf)
    return float(min(LARGEST_RADIUS * unit, SHARE_OF_DISTANCE * nearest))


def _describe(
    case: Case, orbit: int, touching: Touching, radius: float, protection: str | None
) -> PointNode:
    crystal, dimension = case.crystal, case.crystal.dimension
    charge: int | None = None
    phase: float | None = None
    if dimension == 3:
        charge, radius, gap = _charge(case, touching, radius)
    else:
        normal = crystal.cell[crystal.periodic.index(False)]
        normal = normal / np.linalg.norm(normal)
        phase, gap = loop_berry_phase(
            case.bloch, touching.k_frac, normal, radius, case.filling, crystal.reciprocal
        )
    if protection is None:
        protection = _protection(case, touching, radius, phase) if not charge else ""
    kind = _kind(touching, dimension, charge, phase, protection)
    x, y, z = (float(c) for c in touching.k_frac)
    kx, ky, kz = (float(c) for c in touching.k_frac @ crystal.reciprocal)
    return PointNode(
        k=(x, y, z),
        k_cart=(kx, ky, kz),
        orbit=orbit,
        kind=kind,
        gap_ev=touching.gap_ev,
        energy_ev=touching.energy_ev,
        from_reference_ev=touching.energy_ev - case.reference.energy_ev,
        multiplicity=touching.multiplicity,
        n_filled=touching.n_below,
        charge=charge,
        berry_phase_pi=phase,
        surface_radius=radius,
        surface_gap_ev=gap,
        velocities=tuple(float(v) for v in touching.velocities[::-1][:dimension]),
        tilt=touching.tilt_ratio(crystal.periodic),
        protection=protection,
    )


def _charge(case: Case, touching: Touching, radius: float) -> tuple[int | None, float, float]:
    """Charge, radius and gap of the surface."""
    for flattest in FLATTEST:
        flux = node_flux(
            case.bloch,
            touching.k_frac,
            case.filling,
            case.crystal.reciprocal,
            surface_shape(touching.metric, flattest),
            radius,
        )
        if flux.charge is not None:
            break
    return flux.charge, flux.radius, flux.gap_ev


def _protection(case: Case, touching: Touching, radius: float, phase: float | None) -> str:
    operators, crystal = case.operators, case.crystal
    by_phase = crystal.dimension == 2 and touching.multiplicity == 2
    by_phase = by_phase and nearest_quantised(phase) == 1
    if by_phase and quantising_operation(operators, crystal.periodic):
        return "Berry phase π, and an antiunitary symmetry that allows 0 and π only"
    return axis_protection(
        case.bloch, operators, crystal, touching.k_frac, case.filling, radius
    ) or enforced_level(
        case.bloch, operators, crystal, touching, case.filling, spinful=case.spinful
    )


def _kind(
    touching: Touching, dimension: int, charge: int | None, phase: float | None, protection: str
) -> str:
    if (charge if dimension == 3 else phase) is None:
        return "uncharacterised"
    if charge:
        return "weyl"
    if not protection:
        return "accidental"
    fourfold = touching.multiplicity == 4 and touching.n_below == 2
    layer = dimension == 2 and touching.multiplicity == 2
    linear = touching.n_linear(dimension) > 0
    return "dirac" if (fourfold or layer) and linear else "multifold"


def as_vector(k_frac: FloatArray) -> Vector:
    x, y, z = (float(c) for c in k_frac)
    return x, y, z
