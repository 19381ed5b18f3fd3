"""Task function that asks how far the Hamiltonian may move before its indices change."""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial

import numpy as np

from topovet.arrays import BoolArray
from topovet.invariants.mirror_witness import MirrorWitness
from topovet.invariants.results import ParityWitness, WilsonWitness
from topovet.invariants.tipping.by_gap import GapGround
from topovet.invariants.tipping.by_parity import TrimGround, trim_stars
from topovet.invariants.tipping.results import BY_COMPANION, BY_SPIN_PART, TippingSearch
from topovet.invariants.tipping.search import (
    choose_parameters,
    conclude_search,
    search_by_gap,
    search_by_parity,
)
from topovet.model.declarations import Declarations
from topovet.model.fourier import BlochSum
from topovet.model.orbital_groups import OrbitalGroup, declared_groups, element_groups
from topovet.model.shift_choice import ShiftProposal
from topovet.model.spin_parts import Frame, spin_frame, spin_purity
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.steps_shifts import sites_in_use
from topovet.pipeline.steps_witnesses import count_mirror_chern_numbers
from topovet.pipeline.task import NotApplicable, Task
from topovet.pipeline.tipping_way import FarSide, Way
from topovet.spectrum.eigen import one_blas_thread
from topovet.spectrum.results import Electrons, GapSample
from topovet.symmetry.group_results import GroupTest
from topovet.symmetry.inference import InferredInversion
from topovet.symmetry.inversion import build_inversion, inversion_at
from topovet.symmetry.results import (
    InversionOperator,
    InversionTest,
    ShiftTest,
    SpaceGroup,
    TimeReversalTest,
)
from topovet.symmetry.trim import trim_points
from topovet.units import MEV_PER_EV

MOST_GROUPS = {"standard": 2, "thorough": None}
"""Groups of orbitals that are shifted where the gap has to be followed, by effort."""

SOLVES_FOR_30 = {"standard": 6_000, "thorough": 60_000}
"""Diagonalisations for each parameter and direction there, for 30 orbitals."""


@dataclass(frozen=True, slots=True)
class Orbitals:
    """Groups of orbitals, which pairs share a site (n_orb, n_orb), and the spin frame."""

    groups: tuple[OrbitalGroup, ...]
    same_site: BoolArray
    frame: Frame


def look_for_tipping_points(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    inversion: InversionTest,
    electrons: Electrons,
    shifts: ShiftProposal,
    shift_test: ShiftTest,
    space_group: SpaceGroup | None,
    inferred_inversion: InferredInversion | None,
    gap: GapSample | None,
    parity: ParityWitness | None,
    wilson: WilsonWitness | None,
    group: GroupTest | None,
    mirror_chern: MirrorWitness | None,
    spinless_difference: BlochSum | None,
) -> TippingSearch:
    """Nearest tipping points: by parity where parities speak, else along the gap."""
    effort, based = context.settings["effort"], hamiltonian_with_basis
    z2 = None if inversion_beyond(inversion, gap) else _indices(parity)
    _check_asked(effort, based, time_reversal, z2, _indices(wilson))
    orbitals = _orbitals(based, declarations, shifts, shift_test)
    purity = spin_purity(based.lattice.model, orbitals.same_site, orbitals.frame)
    parameters, not_asked = choose_parameters(orbitals.groups, purity, spinless_difference)
    if not parameters:
        raise NotApplicable("; ".join(not_asked))
    with one_blas_thread():
        if z2 is None:
            ground = _gap_ground(based, declarations, electrons, gap, wilson)
            found = search_by_gap(
                ground,
                parameters,
                orbitals.frame,
                most_groups=MOST_GROUPS[effort],
                max_solves=int(SOLVES_FOR_30[effort] * (30 / based.lattice.model.n_orb) ** 2.5),
            )
        else:
            operator = inversion_in_use(based, declarations, inversion, inferred_inversion)
            if operator is None:
                raise NotApplicable("inversion is neither declared nor inferred")
            trims = _trim_ground(based, declarations, operator, electrons, space_group)
            found = search_by_parity(trims, parameters, orbitals.frame)
    points, left_out, n_solves = found
    if gap is not None and z2 is not None:
        way = Way(based, declarations, electrons, gap, parameters, orbitals.frame)
        points = [way.sampled(point) for point in points]
        if space_group and group and mirror_chern:
            count = partial(
                count_mirror_chern_numbers,
                context=context,
                declarations=declarations,
                space_group=space_group,
                group=group,
                time_reversal=time_reversal,
                electrons=electrons,
            )
            points = [FarSide(way, count).counted(point, mirror_chern) for point in points]
    scale_from = BY_SPIN_PART if spinless_difference is None else BY_COMPANION
    return conclude_search(points, (*not_asked, *left_out), purity, n_solves, scale_from)


def _check_asked(
    effort: str,
    based: BasedHamiltonian,
    time_reversal: TimeReversalTest,
    by_parity: tuple[int, ...] | None,
    by_wilson: tuple[int, ...] | None,
) -> None:
    if effort not in MOST_GROUPS:
        raise NotApplicable(f"not looked for at effort {effort}")
    if not (based.lattice.model.spinful and time_reversal.present):
        raise NotApplicable("looked for only where Z2 indices exist: spinors with time reversal")
    if by_parity is None and by_wilson is None:
        raise NotApplicable("no witness gives indices that could flip")
    if by_parity is not None and by_wilson is not None and by_parity != by_wilson:
        raise NotApplicable("the witnesses disagree: there is no verdict to flip")


def _indices(witness: ParityWitness | WilsonWitness | None) -> tuple[int, ...] | None:
    return witness.z2 if witness is not None and witness.status == "ok" else None


def inversion_beyond(inversion: InversionTest, gap: GapSample | None) -> bool:
    """Whether a gap may close on the way to the average over inversion, where parities are."""
    violation = inversion.violation_trim_mev
    return gap is not None and violation is not None and violation >= MEV_PER_EV * gap.direct_ev


def _orbitals(
    based: BasedHamiltonian, declared: Declarations, shifts: ShiftProposal, test: ShiftTest
) -> Orbitals:
    model, basis, cell = based.lattice.model, based.basis, declared.crystal.cell
    if basis is not None:
        apart = basis.positions_frac[:, None] - basis.positions_frac[None]
        same = np.linalg.norm(apart @ cell, axis=2) < 0.05
        return Orbitals(declared_groups(basis), same, spin_frame(basis))
    sites = sites_in_use(declared, shifts, test, model)
    if sites is None:
        pair = np.arange(model.n_orb) // 2
        return Orbitals((), pair[:, None] == pair[None], None)
    symbols = declared.crystal.symbols
    elements = [symbols[a] if (a := int(sites.atoms[s])) >= 0 else "" for s in sites.site_of]
    same = (sites.site_of[:, None] == sites.site_of[None]) & (
        sites.homes[:, None] == sites.homes[None]
    ).all(axis=2)
    return Orbitals(element_groups(elements), same, None)


def inversion_in_use(
    based: BasedHamiltonian,
    declared: Declarations,
    inversion: InversionTest,
    inferred: InferredInversion | None,
) -> InversionOperator | None:
    """The inversion that the parity witness used; None if it is neither declared nor inferred."""
    if based.basis is not None:
        return build_inversion(based.basis, declared.crystal, np.array(inversion.centre))
    return None if inferred is None else inferred.operator


def _trim_ground(
    based: BasedHamiltonian,
    declared: Declarations,
    operator: InversionOperator,
    electrons: Electrons,
    group: SpaceGroup | None,
) -> TrimGround:
    k_trim = trim_points(declared.crystal.periodic)
    rotations = np.eye(3, dtype=np.int64)[None] if group is None else group.rotations
    return TrimGround(
        k_trim=k_trim,
        h=based.lattice.bloch.at(k_trim),
        inversion=inversion_at(operator, k_trim),
        star=trim_stars(k_trim, rotations),
        filling=electrons.filling,
        periodic=declared.crystal.periodic,
    )


def _gap_ground(
    based: BasedHamiltonian,
    declared: Declarations,
    electrons: Electrons,
    gap: GapSample | None,
    wilson: WilsonWitness | None,
) -> GapGround:
    if gap is None or wilson is None or wilson.z2 is None:
        raise NotApplicable("the gap is not known")
    return GapGround(
        bloch=based.lattice.bloch,
        filling=electrons.filling,
        periodic=declared.crystal.periodic,
        z2=wilson.z2,
        known_k=np.array([gap.direct_k, gap.vbm_k, gap.cbm_k]),
    )


TASKS = (
    Task(
        "tipping",
        "ask how far H may move before its indices change",
        look_for_tipping_points,
        needs=(
            "hamiltonian-with-basis",
            "declarations",
            "time-reversal",
            "inversion",
            "electrons",
            "shifts",
            "shift-test",
        ),
        wants=(
            "space-group",
            "inferred-inversion",
            "gap",
            "parity",
            "wilson",
            "group",
            "mirror-chern",
            "spinless-difference",
        ),
        settings=("effort",),
    ),
)
