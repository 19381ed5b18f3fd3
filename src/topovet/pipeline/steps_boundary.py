"""Task functions of the boundary: crossings between surface TRIM, and the surface spectral map.

What they cost at standard effort, in CPU time of one core: the count 100 to 400 half-crystals, 0.2
to 4 s for principal layers of 36 to 96 orbitals and as the cube of that beyond; the map as much
work whatever the crystal, 1 to 3 s; the bands of the surface 1 to 2 s, 10 s with principal layers
of 96 orbitals. All are left out at quick effort.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.boundary.cleavage import CleavagePlane, next_likeliest, rank_surfaces
from topovet.boundary.cone_results import SurfaceStates
from topovet.boundary.layers import LayerStack
from topovet.boundary.recut import Miller
from topovet.boundary.results import SurfaceMap, SurfaceWitness
from topovet.boundary.spectral import adapted_path, compute_surface_maps
from topovet.boundary.surface_states import Bulk, survey_states
from topovet.boundary.witness import CRITERIA, DROPPED_SHARE, compute_surface, prepare_surface
from topovet.model.crystal import Crystal
from topovet.model.declarations import Declarations
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.results import Electrons, GapSample
from topovet.symmetry.results import SpaceGroup, TimeReversalTest
from topovet.units import MEV_PER_EV

MAP_WORK = {"standard": 8e8, "thorough": 1.2e10}
"""Points of the spectral map times (orbitals of a principal layer)^3: seconds, minutes."""

MOST_POINTS = {"standard": 72, "thorough": 160}
"""Points along the path and energies of a map, at most."""

FEWEST_POINTS = 24
"""Fewer show nothing; a crystal that is too large even for these gets no map at this effort."""

MAP_MARGIN_EV = 0.3
"""Energies shown beyond the edges of the gap, at least; half of the gap where that is more."""


def count_surface_crossings(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    gap: GapSample,
    space_group: SpaceGroup | None,
) -> SurfaceWitness:
    """Crossings of surface levels between the surface TRIM; on a closed edge the Chern number.

    Where the likeliest cleavage plane settles nothing, on the next likeliest, and that is said.
    """
    _check(context, gap)
    kramers = time_reversal.present and bool(declarations.spinful)
    if kramers and electrons.filling % 2:
        raise NotApplicable("an odd filling leaves a Kramers pair half filled")
    if not kramers and declarations.crystal.dimension == 3:
        raise NotApplicable("surfaces are followed only for spinors with time reversal")
    choice = chosen_surface(context, hamiltonian_with_basis, declarations, electrons, space_group)
    basis = hamiltonian_with_basis.basis

    def count(miller: Miller, chosen_by: str) -> SurfaceWitness:
        return compute_surface(
            hamiltonian_with_basis.lattice.model,
            declarations.crystal,
            None if basis is None else basis.positions_frac,
            electrons.filling,
            miller,
            gap.direct_ev,
            CRITERIA[context.settings["effort"]],
            kramers=kramers,
            chosen_by=chosen_by,
            symmetry_error_ev=time_reversal.violation_mev / MEV_PER_EV,
        )

    found = count(choice.miller, choice.chosen_by)
    other = next_likeliest(choice.ranked) if choice.ranked else None
    if other is None or found.status not in ("unresolved", "not-applicable"):
        return found
    second = count(other.miller, "next weakest bonds")
    if second.status != "ok":
        return found
    return replace(second, instead_of=found.miller, instead_reason=found.reason)


def map_surface(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    electrons: Electrons,
    gap: GapSample,
    space_group: SpaceGroup | None,
) -> tuple[SurfaceMap, ...]:
    """Spectral density of both terminations along the path of the surface zone."""
    _check(context, gap)
    choice = chosen_surface(context, hamiltonian_with_basis, declarations, electrons, space_group)
    basis = hamiltonian_with_basis.basis
    cut, place, stack = prepare_surface(
        hamiltonian_with_basis.lattice.model,
        declarations.crystal,
        None if basis is None else basis.positions_frac,
        choice.miller,
        most_dropped_mev=MEV_PER_EV * DROPPED_SHARE * gap.direct_ev,
    )
    n_points = _map_points(stack, context.settings["effort"])
    margin = max(MAP_MARGIN_EV, 0.5 * abs(gap.cbm_ev - gap.vbm_ev))
    low, high = sorted((gap.vbm_ev, gap.cbm_ev))
    energies = np.linspace(low - margin, high + margin, n_points)
    upper, lower = place.terminations
    return compute_surface_maps(
        stack,
        cut,
        adapted_path(stack, cut, electrons.filling, n_points),
        energies,
        float(energies[1] - energies[0]),
        electrons.filling,
        (upper.name, lower.name),
    )


def follow_surface_states(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    gap: GapSample,
    surface: SurfaceWitness,
    space_group: SpaceGroup | None,
) -> SurfaceStates:
    """Dirac point, velocity, contours and films, where the surface must carry something."""
    _check(context, gap)
    if surface.status != "ok":
        raise NotApplicable("the crossings of surface levels are not settled")
    if not surface.chern and all(line.parity != 1 for line in surface.lines):
        raise NotApplicable("no line between surface TRIM is crossed an odd number of times")
    basis = hamiltonian_with_basis.basis
    cut, _, stack = prepare_surface(
        hamiltonian_with_basis.lattice.model,
        declarations.crystal,
        None if basis is None else basis.positions_frac,
        surface.miller,
        most_dropped_mev=MEV_PER_EV * DROPPED_SHARE * gap.direct_ev,
    )
    upper, lower = surface.terminations
    return survey_states(
        stack,
        cut,
        Bulk(
            electrons.filling,
            gap.vbm_ev,
            gap.cbm_ev,
            electrons.fermi_ev,
            None if space_group is None else _cartesian(space_group, declarations.crystal),
        ),
        (upper, lower),
        surface.lines,
        kramers=time_reversal.present and bool(declarations.spinful),
    )


def _cartesian(group: SpaceGroup, crystal: Crystal) -> FloatArray:
    """(n, 3, 3) point group in Cartesian axes."""
    to_cart = np.asarray(crystal.cell).T
    return np.asarray(to_cart @ group.rotations @ np.linalg.inv(to_cart))


def _check(context: Context, gap: GapSample) -> None:
    if context.settings["effort"] == "quick":
        raise NotApplicable("left out at --effort quick")
    if gap.status == "gapless":
        raise NotApplicable("the occupied bands touch the others: no energy lies between them")


@dataclass(frozen=True, slots=True)
class SurfaceChoice:
    """Miller indices in the Hamiltonian's own cell, and where they come from.

    Attributes
    ----------
    miller, chosen_by
        As in `SurfaceWitness`.
    ranked
        Likely cleavage planes, where none was asked for.
    """

    miller: Miller
    chosen_by: str
    ranked: tuple[CleavagePlane, ...] = ()


def chosen_surface(
    context: Context,
    based: BasedHamiltonian,
    declared: Declarations,
    electrons: Electrons,
    space_group: SpaceGroup | None,
) -> SurfaceChoice:
    """The surface that is asked for, else the likeliest cleavage plane."""
    asked = context.settings["surface"]
    if asked is not None:
        h, k, l = asked
        return SurfaceChoice((int(h), int(k), int(l)), "options of the run")
    if declared.settings.surface is not None:
        return SurfaceChoice(declared.settings.surface, "case.toml")
    ranked = rank_surfaces(
        based.lattice.model,
        declared.crystal,
        None if based.basis is None else based.basis.positions_frac,
        electrons.filling,
        None if space_group is None else np.asarray(space_group.rotations),
    )
    planar = declared.crystal.dimension == 2
    return SurfaceChoice(ranked[0].miller, "along a1" if planar else "weakest bonds", ranked)


def _map_points(stack: LayerStack, effort: str) -> int:
    """Points along the path, and as many energies, that the effort allows for."""
    each_way = int(np.sqrt(MAP_WORK[effort] / stack.layer_size**3))
    if each_way < FEWEST_POINTS:
        raise NotApplicable(
            f"a principal layer holds {stack.layer_size} orbitals: too many for a map at "
            f"--effort {effort}"
        )
    return min(each_way, MOST_POINTS[effort])


NEEDS = ("hamiltonian-with-basis", "declarations", "electrons", "gap")

TASKS = (
    Task(
        "surface",
        "count crossings of surface levels",
        count_surface_crossings,
        needs=(*NEEDS, "time-reversal"),
        wants=("space-group",),
        settings=("surface", "effort"),
        version=2,
    ),
    Task(
        "surface-states",
        "follow the surface bands, find what can be measured of them",
        follow_surface_states,
        needs=(*NEEDS, "time-reversal", "surface"),
        wants=("space-group",),
        settings=("surface", "effort"),
        version=2,
    ),
    Task(
        "surface-map",
        "map the surface spectral density",
        map_surface,
        needs=NEEDS,
        wants=("space-group",),
        settings=("surface", "effort"),
        version=2,
    ),
)
