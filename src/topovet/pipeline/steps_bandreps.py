"""Tasks on band representations and on how bands connect along the path."""

from __future__ import annotations

import numpy as np

from topovet.arrays import BoolArray, FloatArray
from topovet.invariants.band_reps.path import connect_path
from topovet.invariants.band_reps.path_results import PathConnections
from topovet.invariants.band_reps.results import BandRepWitness
from topovet.invariants.band_reps.witness import GroupInUse, compute_band_rep_witness
from topovet.invariants.irrep_results import PointIrreps
from topovet.model.declarations import Declarations
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.steps_physics import MeshEnergies
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.gap import UNRESOLVED_EV
from topovet.spectrum.results import BandPath, Electrons, GapSample
from topovet.symmetry.bandreps.double_group import build_double_group
from topovet.symmetry.bandreps.layers import Layer, find_layer, keeps_layer, leans, name_of_layer
from topovet.symmetry.group_results import GroupTest
from topovet.symmetry.operations import largest_closed_subset, multiplication_table
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import WannierOperator
from topovet.symmetry.results import SpaceGroup, TimeReversalTest
from topovet.symmetry.spacegroup import name_group
from topovet.units import MEV_PER_EV

HELD_SHARE = 0.25
"""Operations that hold to within this share of the smallest direct gap are used: the average over
them moves H by half of the violation, which cannot close the gap."""


MOST_OPERATIONS = 192
"""Those of a cubic group in a cell of four lattice points. A larger supercell folds the zone, and
the time grows with the cube."""


def sort_by_band_representations(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    space_group: SpaceGroup,
    group: GroupTest,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    mesh: MeshEnergies,
    gap: GapSample | None,
) -> BandRepWitness:
    """What the irreps of the bands say against all atomic limits of the group."""
    based = hamiltonian_with_basis
    layer = find_layer(declarations.crystal)
    if declarations.crystal.dimension < 2:
        raise NotApplicable("groups of chains are not treated")
    if gap is None:
        raise NotApplicable("the gap is not known")
    _check_cell(space_group)
    limit = HELD_SHARE * MEV_PER_EV * max(gap.direct_ev, UNRESOLVED_EV)
    if not time_reversal.present:
        raise NotApplicable("time reversal is broken; magnetic groups are not treated")
    held = [t.violation_mev is not None and t.violation_mev <= limit for t in group.operations]
    of_layer = _of_layer(layer, declarations.crystal.cell, space_group)
    operators = _operators_in_use(
        based, declarations, space_group, group, np.array(held) & of_layer
    )
    rotations = np.array([o.rotation for o in operators])
    translations = np.array([o.translation for o in operators])
    cell = declarations.crystal.cell
    if layer is None:
        number, symbol = name_group(rotations, translations, cell)
    else:
        number, symbol = name_of_layer(layer, cell, rotations, translations)
    in_use = GroupInUse(
        operators=operators,
        name=f"{number} ({symbol})",
        n_structure=int(of_layer.sum()),
        time_reversal=True,
        spinful=based.lattice.model.spinful,
        layer=layer,
    )
    return compute_band_rep_witness(
        based.lattice.bloch,
        in_use,
        declarations.crystal,
        electrons.filling,
        _open_gaps(mesh, kramers=in_use.spinful),
    )


def connect_along_path(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    space_group: SpaceGroup,
    group: GroupTest,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    bands: BandPath,
    irreps: tuple[PointIrreps, ...],
) -> PathConnections:
    """Which level runs into which along the path, by the symmetry that the bands have."""
    based, crystal = hamiltonian_with_basis, declarations.crystal
    if based.basis is None:
        raise NotApplicable(f"no operators can be built: {based.reason}")
    if not time_reversal.present:
        raise NotApplicable("time reversal is broken; magnetic groups are not treated")
    _check_cell(space_group)
    if group.in_bands is None:
        raise NotApplicable("the symmetry of the bands is not known")
    built = build_operators(based.basis, crystal, space_group.rotations, space_group.translations)
    at = dict(zip(built.indices.tolist(), built.operators, strict=True))
    of_layer = _of_layer(find_layer(crystal), crystal.cell, space_group)
    members = [i for i in group.in_bands.members if i < group.n_structure and of_layer[i]]
    operators = [at[i] for i in members]
    table = build_double_group(
        crystal.cell,
        np.array([o.rotation for o in operators]),
        np.array([o.translation for o in operators]),
        spinful=based.lattice.model.spinful,
    )
    return connect_path(table, operators, based.lattice.bloch, bands, irreps, electrons.filling)


def _operators_in_use(
    based: BasedHamiltonian,
    declared: Declarations,
    space_group: SpaceGroup,
    group: GroupTest,
    held: BoolArray,
) -> tuple[WannierOperator, ...]:
    """Operators of the largest group among the operations that H has to within a limit."""
    if based.basis is None:
        raise NotApplicable(f"no operators can be built: {based.reason}")
    rotations, translations = space_group.rotations, space_group.translations
    built = build_operators(based.basis, declared.crystal, rotations, translations)
    by_position = dict(zip(built.indices.tolist(), built.operators, strict=True))
    # at every sampled k, not on the mesh alone: maximal strata need not be mesh points
    among = np.array([h and i in by_position for i, h in enumerate(held)])
    table, _ = multiplication_table(rotations, translations, np.zeros(len(rotations), dtype=bool))
    among[np.flatnonzero(np.all(table == np.arange(len(table)), axis=1))] = True
    badness = np.array([test.violation_mev or 0.0 for test in group.operations])
    return tuple(by_position[i] for i in largest_closed_subset(table, among, badness).tolist())


def _check_cell(space_group: SpaceGroup) -> None:
    if len(space_group.rotations) > MOST_OPERATIONS:
        raise NotApplicable(
            f"the cell repeats a smaller one: {len(space_group.rotations)} operations, "
            f"{MOST_OPERATIONS} at most"
        )


def _of_layer(layer: Layer | None, cell: FloatArray, space_group: SpaceGroup) -> BoolArray:
    """(n,) which operations of the cell are the layer's; all of them for a crystal."""
    rotations, translations = space_group.rotations, space_group.translations
    if layer is None:
        return np.ones(len(rotations), dtype=bool)
    if leans(layer, rotations).any():
        raise NotApplicable(
            "symmetry takes the lattice vector that leads out of the layer to one that leans "
            "otherwise; a cell with that vector along the normal is needed"
        )
    return keeps_layer(layer, rotations, translations, cell)


def _open_gaps(mesh: MeshEnergies, *, kramers: bool) -> list[int]:
    """Numbers of lowest bands whose direct gap stays open on the mesh."""
    energies = mesh.energies_ev.reshape(-1, mesh.energies_ev.shape[-1])
    gaps = (energies[:, 1:] - energies[:, :-1]).min(axis=0)
    fillings = np.flatnonzero(gaps > UNRESOLVED_EV) + 1
    return [int(n) for n in fillings if not (kramers and n % 2)]


TASKS = (
    Task(
        "band-representations",
        "hold the bands against all atomic limits of the group",
        sort_by_band_representations,
        needs=(
            "hamiltonian-with-basis",
            "declarations",
            "space-group",
            "group",
            "time-reversal",
            "electrons",
            "mesh",
        ),
        wants=("gap",),
        version=3,
    ),
    Task(
        "band-connections",
        "follow levels along the band path by their irreps",
        connect_along_path,
        needs=(
            "hamiltonian-with-basis",
            "declarations",
            "space-group",
            "group",
            "time-reversal",
            "electrons",
            "bands",
            "irreps",
        ),
    ),
)
