"""The case under examination, and how any reading of it is put to the witnesses."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.diagnosis.results import Rereading
from topovet.errors import UndefinedError
from topovet.invariants.parity import compute_parity
from topovet.invariants.results import ParityWitness, WilsonWitness
from topovet.invariants.wilson_sheet import SheetCriteria
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.assemble import LatticeHamiltonian
from topovet.model.crystal import Crystal
from topovet.spectrum.eigen import mesh_eigenvalues, mesh_solves
from topovet.spectrum.gap import EVEN_BANDS_MEV, choose_mesh, sample_gap
from topovet.symmetry.inversion import measure_inversion
from topovet.symmetry.results import InversionOperator, InversionTest, TimeReversalTest
from topovet.symmetry.time_reversal import measure_time_reversal

BRIEF = SheetCriteria(max_solves=1_000)
"""Wilson loops of a reading that may be nonsense must not cost more than those of the case."""

AS_BEFORE = 1.5
"""A violation of time reversal that grows by less than this factor is still that of the shifts."""


@dataclass(frozen=True, slots=True, eq=False)
class Subject:
    """One case as it was read.

    Attributes
    ----------
    lattice
        The Hamiltonian, spin interlaced.
    crystal
        Cell and periodic directions.
    filling
        Occupied bands.
    operator
        Inversion that parities are counted with; None without any.
    time_reversal, inversion
        As measured.
    """

    lattice: LatticeHamiltonian
    crystal: Crystal
    filling: int
    operator: InversionOperator | None
    time_reversal: TimeReversalTest
    inversion: InversionTest


def with_hamiltonian(subject: Subject, lattice: LatticeHamiltonian) -> Subject:
    """The case with another Hamiltonian in the same basis, its symmetries measured anew."""
    periodic, inversion = subject.crystal.periodic, subject.inversion
    if subject.operator is not None:
        measured = measure_inversion(lattice.model, lattice.bloch, subject.operator, periodic)
        inversion = replace(measured, basis=inversion.basis)
    reversal = measure_time_reversal(lattice.model, lattice.bloch, periodic)
    known = subject.time_reversal
    if known.present and reversal.violation_mev <= AS_BEFORE * known.violation_mev:
        reversal = replace(reversal, present=True)  # only shifts break it, here as before
    return replace(subject, lattice=lattice, time_reversal=reversal, inversion=inversion)


def with_inversion(subject: Subject, operator: InversionOperator, basis: str) -> Subject:
    """The case with another inversion operator, "declared" or "inferred"."""
    lattice = subject.lattice
    measured = measure_inversion(lattice.model, lattice.bloch, operator, subject.crystal.periodic)
    return replace(subject, operator=operator, inversion=replace(measured, basis=basis))


def ask(
    subject: Subject,
    kind: str,
    change: str,
    *,
    moved_mev: float | None = None,
    effort: str = "quick",
    criteria: SheetCriteria = BRIEF,
    parity: ParityWitness | None = None,
) -> Rereading:
    """Gap, parities and Wilson loops of one reading.

    Parameters
    ----------
    subject
        The reading.
    kind, change, moved_mev
        See `Rereading`.
    effort
        Of the mesh on which the gap is looked for.
    criteria
        Of the Wilson loops, each plane covered one way.
    parity
        Where it is known already.
    """
    energies, even = _mesh(subject, effort)
    gap = sample_gap(
        subject.lattice.bloch,
        energies,
        subject.filling,
        n_solves=mesh_solves(choose_mesh(subject.crystal, effort), even=even),
    )
    kramers = subject.time_reversal.present and subject.lattice.model.spinful
    if parity is None and subject.operator is not None:
        parity = compute_parity(
            subject.lattice.bloch,
            subject.operator,
            subject.filling,
            subject.crystal.periodic,
            kramers=kramers,
        )
    wilson = None if gap.status == "gapless" or not kramers else _wilson(subject, criteria)
    return Rereading(
        kind=kind,
        change=change,
        filling=subject.filling,
        moved_mev=moved_mev,
        gap=gap,
        typical_gap_ev=_typical_gap(energies, subject.filling),
        time_reversal=subject.time_reversal,
        inversion=subject.inversion,
        parity=parity,
        wilson=wilson,
    )


def typical_gap_ev(subject: Subject) -> float:
    """Median over a coarse mesh of the gap between the last occupied and the first empty band."""
    return _typical_gap(_mesh(subject, "quick")[0], subject.filling)


def _typical_gap(energies: FloatArray, filling: int) -> float:
    return float(np.median(energies[..., filling] - energies[..., filling - 1]))


def _mesh(subject: Subject, effort: str) -> tuple[FloatArray, bool]:
    """(n1, n2, n3, n_orb) energies, eV, and whether E(-k) = E(k) was made use of."""
    mesh = choose_mesh(subject.crystal, effort)
    reversal = subject.time_reversal
    even = reversal.present and reversal.violation_mev <= EVEN_BANDS_MEV
    return mesh_eigenvalues(subject.lattice.bloch, mesh, even=even), even


def _wilson(subject: Subject, criteria: SheetCriteria) -> WilsonWitness | None:
    witness = compute_wilson(
        subject.lattice.bloch,
        subject.filling,
        subject.crystal.periodic,
        time_reversal=True,
        spinful=True,
        criteria=criteria,
        both_ways=False,
    )
    return None if witness.status == "not-applicable" else witness


def largest_band_shift_mev(subject: Subject, lattice: LatticeHamiltonian) -> float:
    """Largest |E_n(k)| difference to another Hamiltonian on a coarse mesh, meV.

    Raises
    ------
    UndefinedError
        The two have different numbers of bands.
    """
    if lattice.model.n_orb != subject.lattice.model.n_orb:
        raise UndefinedError("Hamiltonians with different numbers of bands cannot be compared")
    mesh = choose_mesh(subject.crystal, "quick")
    both = [mesh_eigenvalues(h.bloch, mesh, even=False) for h in (subject.lattice, lattice)]
    return 1000.0 * float(np.abs(both[1] - both[0]).max())
