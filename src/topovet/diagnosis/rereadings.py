"""Ways of reading a case anew, one for each cause that could stand behind a doubtful verdict."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

import numpy as np

from topovet.diagnosis.results import Rereading
from topovet.diagnosis.subject import (
    Subject,
    ask,
    largest_band_shift_mev,
    with_hamiltonian,
    with_inversion,
)
from topovet.invariants.inferred_parity import compute_inferred_parity
from topovet.invariants.wilson_sheet import CRITERIA
from topovet.model.assemble import LatticeHamiltonian
from topovet.model.basis import OrbitalBasis
from topovet.model.fourier import build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel
from topovet.symmetry.declaration_check import corrected_inversion
from topovet.symmetry.declaration_results import Correction
from topovet.symmetry.inference import InferredInversion
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import NotClosedError, build_operator, with_time_reversal
from topovet.symmetry.results import SpaceGroup
from topovet.symmetry.symmetrise import symmetrise
from topovet.symmetry.time_reversal import sampled_k

RANGE_KEPT = 0.75
"""Share of the longest R vector that the shorter-ranged Hamiltonian keeps."""

FILLING_STEPS = (-2, -1, 1, 2)
"""Fillings looked at beside the stated one."""


def reread_declaration(
    subject: Subject, basis: OrbitalBasis, correction: Correction, change: str
) -> Rereading:
    """Declared orbitals as a correction has them."""
    operator = corrected_inversion(basis, subject.crystal, correction)
    kind = "centre" if correction.reading.kind == "centre" else "declaration"
    return ask(with_inversion(subject, operator, "declared"), kind, change)


def reread_inferred(
    subject: Subject, inferred: InferredInversion, kind: str, change: str
) -> Rereading | None:
    """Inversion inferred from the Hamiltonian in place of the declared one."""
    if inferred.operator is None or inferred.reliability == "refused":
        return None
    model = subject.lattice.model
    parity = compute_inferred_parity(
        subject.lattice.bloch,
        inferred,
        subject.filling,
        subject.crystal.periodic,
        kramers=subject.time_reversal.present and model.spinful,
    )
    return ask(with_inversion(subject, inferred.operator, "inferred"), kind, change, parity=parity)


def reread_fillings(subject: Subject, also: Sequence[int] = ()) -> Iterator[Rereading]:
    """One or two electrons more or less, and other fillings that something speaks for.

    Odd ones are left out where bands come in Kramers pairs, for they have no gap.
    """
    n_orb = subject.lattice.model.n_orb
    pairs = subject.time_reversal.present and subject.lattice.model.spinful
    near = {subject.filling + step for step in FILLING_STEPS}
    for filling in sorted((near | set(also)) - {subject.filling}):
        if not 0 < filling < n_orb or (pairs and filling % 2):
            continue
        change = f"{filling} occupied bands in place of {subject.filling}"
        yield ask(replace(subject, filling=filling), "filling", change)


def reread_symmetrised(
    subject: Subject, basis: OrbitalBasis, group: SpaceGroup, *, reversal: bool
) -> Rereading | None:
    """The mean of H over the group of the structure, with time reversal where it is to hold.

    None where the declared orbitals are not closed under the group.
    """
    crystal, lattice = subject.crystal, subject.lattice
    built = build_operators(basis, crystal, group.rotations, group.translations)
    if len(built.operators) < len(group.rotations):
        return None
    theta = None
    if reversal:
        neutral = build_operator(basis, crystal, group.rotations[0], group.translations[0])
        theta = with_time_reversal(neutral, basis)
    try:
        made = symmetrise(
            lattice.model,
            lattice.bloch,
            built.operators,
            sampled_k(crystal.periodic),
            time_reversal=theta,
        )
    except NotClosedError:
        return None
    mean = LatticeHamiltonian(made.model, build_bloch_sum(made.model))
    what = "the space group" + (" and time reversal" if reversal else "")
    change = f"H averaged over {what}"
    return ask(with_hamiltonian(subject, mean), "symmetrised", change, moved_mev=made.distance_mev)


def reread_shorter(subject: Subject) -> Rereading | None:
    """Without the outermost R vectors: does the verdict rest on them?

    None for a Hamiltonian of nearest neighbours, which has nothing to spare.
    """
    model = subject.lattice.model
    length = np.linalg.norm(model.r_cells @ subject.crystal.cell, axis=1)
    kept = length <= RANGE_KEPT * length.max()
    if np.unique(np.round(length[kept], 3)).size < 3:
        return None
    shorter = TightBindingModel(model.r_cells[kept], model.h_r[kept], model.spinful)
    lattice = LatticeHamiltonian(shorter, build_bloch_sum(shorter))
    change = f"hoppings beyond {RANGE_KEPT * length.max():.1f} angstrom left out"
    moved = largest_band_shift_mev(subject, lattice)
    return ask(with_hamiltonian(subject, lattice), "shorter-range", change, moved_mev=moved)


def reread_bare(subject: Subject, bare: LatticeHamiltonian) -> Rereading:
    """On the R vectors of the file, without Wigner-Seitz shifts."""
    moved = largest_band_shift_mev(subject, bare)
    change = "R vectors as listed, without Wigner-Seitz shifts"
    return ask(with_hamiltonian(subject, bare), "bare", change, moved_mev=moved)


def look_closer(subject: Subject) -> Rereading:
    """Nothing changed: a denser search for the gap, and Wilson loops on denser lines."""
    change = "denser mesh for the gap, denser lines for Wilson loops"
    closer = replace(CRITERIA["thorough"], max_solves=CRITERIA["quick"].max_solves)
    return ask(subject, "closer-look", change, effort="standard", criteria=closer)
