"""All that is followed of one surface or edge: pairs, cones, contours, films, edge crossings."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.boundary.cone import (
    fit_shape,
    follow_cone,
    kramers_pairs,
    surface_trim,
    windows,
)
from topovet.boundary.cone_results import (
    Cone,
    Contour,
    EdgeCrossing,
    EnergyMap,
    KramersPair,
    SurfaceStates,
)
from topovet.boundary.contours import BandCurves, with_spin
from topovet.boundary.edge_crossings import edge_crossings
from topovet.boundary.energy_map import constant_energy_map
from topovet.boundary.evanescent import decay_length
from topovet.boundary.layers import LayerStack
from topovet.boundary.levels import surface_levels
from topovet.boundary.recut import Recut
from topovet.boundary.results import SurfaceLine, ThicknessSeries
from topovet.boundary.slab import compute_thickness_series
from topovet.boundary.warping import fit_warping, mirrors_of_surface

CONTOURS_EV = (0.015, 0.03, 0.06, 0.1, 0.15, 0.2, 0.25, 0.3)
"""Energies from the Dirac point at which contours are looked for, on both sides."""

MOST_CONTOURS = 5
"""On either side."""

APART_EV = 0.01
"""Contours are no nearer than this to the one at the Fermi energy."""

FILM_ORBITALS = 400
"""The thickest film solved holds at most so many orbitals."""

MOST_PLANES = 12
"""And so many lattice planes."""

OFF_SHARE = 0.08
"""Of the gap: an energy this near to a pair is moved away from it."""

SAME_EV = 1e-3
"""Pairs of the two faces that are nearer to each other than this are one and the same."""


@dataclass(frozen=True, slots=True, eq=False)
class Bulk:
    """What is known of the bulk.

    Attributes
    ----------
    filling
        Occupied bands.
    vbm_ev, cbm_ev
        Edges of the bulk bands; cbm below vbm in a semimetal.
    fermi_ev
        Fermi energy of the input; None where there is none.
    rotations_cart
        (n, 3, 3) point group of the structure; None where there is no structure.
    """

    filling: int
    vbm_ev: float
    cbm_ev: float
    fermi_ev: float | None
    rotations_cart: FloatArray | None = None

    def exposure_ev(self, energy_ev: float) -> float:
        """Distance to the nearest bulk band edge; not positive inside the bands."""
        return min(energy_ev - self.vbm_ev, self.cbm_ev - energy_ev)

    @property
    def reference_ev(self) -> float:
        """The Fermi energy where it lies in the gap, else the middle of the gap."""
        fermi = self.fermi_ev
        inside = fermi is not None and self.vbm_ev < fermi < self.cbm_ev
        return fermi if inside and fermi is not None else 0.5 * (self.vbm_ev + self.cbm_ev)


def survey_states(
    stack: LayerStack,
    cut: Recut,
    bulk: Bulk,
    terminations: tuple[str, str],
    lines: Sequence[SurfaceLine],
    *,
    kramers: bool,
) -> SurfaceStates:
    """What both half-crystals carry.

    Parameters
    ----------
    stack, cut
        The crystal by planes, and their cell.
    bulk
        Its filling and band edges.
    terminations
        Names of the two.
    lines
        What was counted between the surface TRIM.
    kramers
        Whether time reversal squares to -1; without it only edges are followed.
    """
    edge = len(cut.axes) == 1
    if not kramers:
        found = _crossings(stack, cut, bulk, (), lines, kramers=False) if edge else ()
        return SurfaceStates(terminations, (), (), (), None, "", found)
    trim = surface_trim(cut)
    low, high = windows(stack, trim, bulk.filling)
    pairs = kramers_pairs(surface_levels(stack, trim, low, high), trim, low, high, len(cut.axes))
    crossings = _crossings(stack, cut, bulk, pairs, lines, kramers=True) if edge else ()
    cones = tuple(
        cone for pair in _best(pairs, bulk) if (cone := _cone(stack, cut, bulk, pair)) is not None
    )
    films, note = (None, "an edge has no film") if edge else _films(stack, cut, bulk, pairs, cones)
    return SurfaceStates(
        terminations,
        tuple(pairs),
        _buried(pairs, lines),
        cones,
        films,
        note,
        crossings,
        None if edge or not cones else _energy_map(stack, cut, bulk, cones[0]),
    )


def _energy_map(stack: LayerStack, cut: Recut, bulk: Bulk, cone: Cone) -> EnergyMap | None:
    """At the Dirac point and the Fermi energy, else at the widest contour free of bulk states."""
    if not cone.contours:
        return None
    at_fermi = [c for c in cone.contours if c.energy_ev == bulk.fermi_ev]
    free = [c for c in cone.contours if bulk.exposure_ev(c.energy_ev) > 0]
    chosen = max(at_fermi or free or cone.contours, key=lambda c: c.area_ang2)
    return constant_energy_map(stack, cut, cone, chosen.energy_ev)


def _crossings(
    stack: LayerStack,
    cut: Recut,
    bulk: Bulk,
    pairs: Sequence[KramersPair],
    lines: Sequence[SurfaceLine],
    *,
    kramers: bool,
) -> tuple[EdgeCrossing, ...]:
    """Edge levels in the gap; none where they do not add up to what was counted on the line."""
    width = bulk.cbm_ev - bulk.vbm_ev
    if width <= 0 or len(lines) != 1:
        return ()
    energy = bulk.reference_ev
    while any(abs(p.energy_ev - energy) < OFF_SHARE * width for p in pairs):
        energy += OFF_SHARE * width  # a degenerate pair is no crossing that can be followed
    if not energy < bulk.cbm_ev - OFF_SHARE * width:
        return ()
    found = edge_crossings(stack, cut, bulk.vbm_ev, bulk.cbm_ev, energy, half_zone=kramers)
    for side in (0, 1):
        own = [c for c in found if c.side == side]
        net = sum(1 if c.velocity_ev_ang > 0 else -1 for c in own)
        wanted = (lines[0].net or 0) * (1 if side == 0 else -1)
        if (len(own) % 2 != lines[0].parity) if kramers else (net != wanted):
            return ()
    return found


def _best(pairs: Sequence[KramersPair], bulk: Bulk) -> list[KramersPair]:
    """Of each half-crystal the pair farthest from the bulk bands; where both have it, one."""
    best: list[KramersPair] = []
    for side in (0, 1):
        own = [p for p in pairs if p.side == side]
        if own:
            best.append(max(own, key=lambda p: bulk.exposure_ev(p.energy_ev)))
    return best[:1] if len(best) == 2 and same_pair(*best) else best


def same_pair(a: KramersPair, b: KramersPair) -> bool:
    """Whether the two faces have the same pair, as inversion demands."""
    return a.k_par == b.k_par and abs(a.energy_ev - b.energy_ev) < SAME_EV


def _buried(
    pairs: Sequence[KramersPair], lines: Sequence[SurfaceLine]
) -> tuple[tuple[float, ...], ...]:
    """Ends of odd lines where neither half-crystal has a pair, if that holds for both ends."""
    held = {p.k_par for p in pairs}
    found: list[tuple[float, ...]] = []
    for line in lines:
        if line.parity == 1 and line.start not in held and line.end not in held:
            found += [line.start, line.end]
    return tuple(dict.fromkeys(found))


def _cone(stack: LayerStack, cut: Recut, bulk: Bulk, pair: KramersPair) -> Cone | None:
    """The cone of a pair; None where its bands are lost among bulk states at once."""
    branches = follow_cone(stack, cut, bulk.filling, pair)
    shape = fit_shape(branches, pair.energy_ev)
    if not np.isfinite(shape.velocity_ev_ang).all():
        return None
    contours: list[Contour] = []
    if len(cut.axes) == 2:
        curves = BandCurves(branches, pair)
        at_fermi = None if bulk.fermi_ev is None else curves.contour_at(bulk.fermi_ev)
        contours = [] if at_fermi is None else [at_fermi]
        for sign in (1, -1):
            asked = [pair.energy_ev + sign * e for e in CONTOURS_EV]
            asked = [e for e in asked if all(abs(c.energy_ev - e) > APART_EV for c in contours)]
            made = [c for e in asked if (c := curves.contour_at(e)) is not None]
            contours += made[:MOST_CONTOURS]
    return Cone(
        pair=pair,
        azimuth_rad=branches.azimuth_rad,
        k_ang=branches.k_ang,
        upper_ev=branches.upper_ev,
        lower_ev=branches.lower_ev,
        velocity_ev_ang=shape.velocity_ev_ang,
        curvature_ev_ang2=shape.curvature_ev_ang2,
        velocity_spread_ev_ang=shape.spread_ev_ang,
        warping=fit_warping(branches, pair, *mirrors_of_surface(cut, bulk.rotations_cart)),
        decay_ang=decay_length(stack, cut, np.array([*pair.k_par, 0.0][:2]), pair.energy_ev),
        contours=with_spin(stack, cut, branches, pair, sorted(contours, key=lambda c: c.energy_ev)),
    )


def _films(
    stack: LayerStack,
    cut: Recut,
    bulk: Bulk,
    pairs: Sequence[KramersPair],
    cones: Sequence[Cone],
) -> tuple[ThicknessSeries | None, str]:
    """Gaps of films at the momentum of the cone that both faces share."""
    if not cones:
        return None, "no cone was followed"
    if bulk.cbm_ev <= bulk.vbm_ev:
        return None, "the bulk bands overlap, so that filling a film does not single out its cone"
    shared = [p for p in pairs if p.side == 1 and same_pair(p, cones[0].pair)]
    if cones[0].pair.side != 0 or not shared:
        return None, "the two faces differ, so that a film's gap is not that of one cone"
    most = min(MOST_PLANES, FILM_ORBITALS // stack.n_orb)
    if most < 3:
        return None, f"three planes hold more than {FILM_ORBITALS} orbitals"
    k_par = np.array(cones[0].pair.k_par)
    series = compute_thickness_series(stack, cut, k_par, bulk.filling, range(1, most + 1))
    return series, f"up to {most} planes"
