"""The task graph of one case: every task, declared once. A new step is a new entry here."""

from __future__ import annotations

from topovet.intake import records
from topovet.intake.audit_results import HamiltonianAudit
from topovet.invariants import results as invariants
from topovet.model.crystal import Crystal
from topovet.model.decay import DecayProfile
from topovet.model.declarations import Declarations
from topovet.pipeline import steps_intake, steps_physics, steps_report
from topovet.pipeline.codec import Codec
from topovet.pipeline.task import Task
from topovet.spectrum import results as spectrum
from topovet.symmetry import results as symmetry

STORED_TYPES = (
    records.CaseSettings,
    records.DeclaredOrbital,
    Crystal,
    Declarations,
    HamiltonianAudit,
    DecayProfile,
    symmetry.SpinOrder,
    symmetry.SpaceGroup,
    symmetry.TimeReversalTest,
    symmetry.InversionTest,
    symmetry.ShiftTest,
    spectrum.Electrons,
    spectrum.GapSample,
    spectrum.BandPath,
    spectrum.InterpolationCheck,
    invariants.TrimParity,
    invariants.ParityWitness,
)
"""Dataclasses that results on disk are made of."""

HAMILTONIAN_FILES = ("hr", "tb")


def result_codec() -> Codec:
    """Reads and writes the results of all stored tasks."""
    return Codec(STORED_TYPES)


def case_tasks() -> tuple[Task, ...]:
    """All tasks of one case, in the order in which a person would tell them."""
    return (*_intake_tasks(), *_physics_tasks(), *_report_tasks())


def _intake_tasks() -> tuple[Task, ...]:
    return (
        Task(
            "hamiltonian",
            "read H(R)",
            steps_intake.read_hamiltonian,
            reads=HAMILTONIAN_FILES,
            stored=False,
            essential=True,
        ),
        Task(
            "declarations",
            "bring cell, atoms, projections and settings together",
            steps_intake.read_declarations,
            needs=("hamiltonian",),
            reads=("win", "structure", "settings"),
            essential=True,
        ),
        Task(
            "space-group",
            "find the space group of the structure",
            steps_intake.search_space_group,
            needs=("declarations",),
        ),
        Task(
            "unshifted",
            "assemble H(k) on the bare R vectors",
            steps_intake.read_without_shifts,
            needs=("hamiltonian", "declarations"),
            stored=False,
            essential=True,
        ),
        Task(
            "spin-order",
            "find the order of the spinors",
            steps_intake.settle_spin_order,
            needs=("declarations", "unshifted"),
            essential=True,
        ),
        Task(
            "interlaced",
            "bring spinors to one order",
            steps_intake.interlace,
            needs=("hamiltonian", "spin-order"),
            stored=False,
            essential=True,
        ),
        Task(
            "shifts",
            "read or rebuild the Wigner-Seitz shifts",
            steps_intake.find_shifts,
            needs=("hamiltonian", "interlaced", "declarations", "spin-order"),
            reads=("wsvec", "centres"),
            stored=False,
            essential=True,
        ),
        Task(
            "shift-test",
            "test suspicious Wannier centres on the Hamiltonian",
            steps_intake.judge_shifts,
            needs=("interlaced", "declarations", "shifts"),
            wants=("space-group",),
            essential=True,
        ),
        Task(
            "audit",
            "measure the soundness of the files",
            steps_intake.audit,
            needs=("hamiltonian", "declarations", "shifts", "shift-test"),
            essential=True,
        ),
        Task(
            "lattice",
            "assemble H(R) and H(k)",
            steps_intake.assemble_lattice,
            needs=("interlaced", "declarations", "shifts", "shift-test"),
            stored=False,
            essential=True,
        ),
        Task(
            "decay",
            "follow the hoppings out to the rim",
            steps_intake.profile_decay,
            needs=("declarations", "lattice"),
            essential=True,
        ),
        Task(
            "time-reversal",
            "test time reversal",
            steps_intake.check_time_reversal,
            needs=("interlaced", "declarations", "shifts", "lattice"),
            essential=True,
        ),
        Task(
            "hamiltonian-with-basis",
            "attach the declared orbitals",
            steps_intake.attach_basis,
            needs=("declarations", "lattice"),
            stored=False,
            essential=True,
        ),
    )


def _physics_tasks() -> tuple[Task, ...]:
    return (
        Task(
            "inversion",
            "test inversion on the Hamiltonian",
            steps_physics.check_inversion,
            needs=("hamiltonian-with-basis", "declarations"),
            wants=("space-group",),
            essential=True,
        ),
        Task(
            "mesh",
            "solve for the energies on a mesh",
            steps_physics.solve_mesh,
            needs=("hamiltonian-with-basis", "declarations", "time-reversal"),
            settings=("effort",),
            stored=False,
            essential=True,
        ),
        Task(
            "electrons",
            "settle the filling",
            steps_physics.count,
            needs=("declarations", "time-reversal", "mesh"),
            settings=("filling", "fermi_ev"),
            essential=True,
        ),
        Task(
            "gap",
            "look for the smallest gaps",
            steps_physics.look_for_gap,
            needs=("hamiltonian-with-basis", "mesh", "electrons"),
        ),
        Task(
            "parity",
            "count parities at the TRIM",
            steps_physics.read_parities,
            needs=(
                "hamiltonian-with-basis",
                "declarations",
                "time-reversal",
                "inversion",
                "electrons",
            ),
        ),
        Task(
            "bands",
            "follow the bands along the special points",
            steps_physics.follow_bands,
            needs=("hamiltonian-with-basis", "declarations"),
        ),
        Task(
            "interpolation",
            "compare with the energies that came along",
            steps_physics.compare_energies,
            needs=("hamiltonian-with-basis", "electrons"),
            reads=("win", "eig", "band", "band_kpt"),
        ),
    )


def _report_tasks() -> tuple[Task, ...]:
    judged = (
        "declarations",
        "audit",
        "decay",
        "spin-order",
        "time-reversal",
        "inversion",
        "electrons",
    )
    if_there = ("space-group", "gap", "parity", "interpolation")
    return (
        Task(
            "verdict",
            "draw the conclusion and raise the flags",
            steps_report.conclude_case,
            needs=(*judged, "shift-test"),
            wants=if_there,
            stored=False,
            essential=True,
        ),
        Task(
            "report-material",
            "gather what the report shows",
            steps_report.gather,
            needs=(*judged, "verdict"),
            wants=(*if_there, "bands"),
            stored=False,
            essential=True,
        ),
    )
