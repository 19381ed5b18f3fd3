"""The task graph of one case: every task, declared once. A new step is a new entry here."""

from __future__ import annotations

from topovet.intake import records
from topovet.intake.audit_results import HamiltonianAudit
from topovet.invariants import irrep_results as irreps
from topovet.invariants import results as invariants
from topovet.invariants import rotation_indicators as rotations
from topovet.invariants.rotation_eigenvalues import EigenvalueCount
from topovet.model.crystal import Crystal
from topovet.model.decay import DecayProfile
from topovet.model.declarations import Declarations
from topovet.pipeline import (
    steps_intake,
    steps_physics,
    steps_report,
    steps_symmetry,
    steps_witnesses,
)
from topovet.pipeline.codec import Codec
from topovet.pipeline.task import Task
from topovet.spectrum import results as spectrum
from topovet.symmetry import group_results
from topovet.symmetry import results as symmetry
from topovet.symmetry.az_class import AzClass
from topovet.symmetry.inference import InferredInversion
from topovet.symmetry.irrep_names import IrrepName

STORED_TYPES = (
    records.CaseSettings,
    records.DeclaredOrbital,
    Crystal,
    Declarations,
    HamiltonianAudit,
    DecayProfile,
    symmetry.SpinOrder,
    symmetry.InversionOperator,
    InferredInversion,
    AzClass,
    symmetry.SpaceGroup,
    symmetry.TimeReversalTest,
    symmetry.InversionTest,
    symmetry.ShiftTest,
    group_results.OperationTest,
    group_results.FoundGroup,
    group_results.GroupTest,
    spectrum.Electrons,
    spectrum.GapSample,
    spectrum.BandPath,
    spectrum.InterpolationCheck,
    invariants.TrimParity,
    invariants.ParityWitness,
    invariants.WilsonPlane,
    invariants.WilsonWitness,
    invariants.ChernPlane,
    invariants.ChernWitness,
    IrrepName,
    irreps.IrrepContent,
    irreps.LevelIrreps,
    irreps.PointIrreps,
    EigenvalueCount,
    rotations.S4Axis,
    rotations.S4Indicator,
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
            version=2,
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
            "bare",
            "the bare R vectors with spinors in one order",
            steps_intake.read_interlaced_without_shifts,
            needs=("interlaced", "declarations", "spin-order", "unshifted"),
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
            version=2,
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
            needs=("declarations", "shifts", "lattice", "bare"),
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
            "inferred-inversion",
            "infer inversion from the Hamiltonian itself",
            steps_symmetry.infer_from_hamiltonian,
            needs=("lattice", "declarations", "shifts", "space-group"),
        ),
        Task(
            "symmetry-class",
            "find the Altland-Zirnbauer class",
            steps_symmetry.find_symmetry_class,
            needs=("lattice", "declarations", "time-reversal"),
        ),
        Task(
            "inversion",
            "test inversion on the Hamiltonian",
            steps_physics.check_inversion,
            needs=("hamiltonian-with-basis", "declarations"),
            wants=("space-group", "inferred-inversion"),
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
            "inferred-parity",
            "count parities about the inferred inversion",
            steps_physics.read_inferred_parities,
            needs=(
                "lattice",
                "declarations",
                "time-reversal",
                "electrons",
                "inferred-inversion",
            ),
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
            wants=("inferred-parity",),
        ),
        Task(
            "wilson",
            "follow Wilson loops over the invariant planes",
            steps_witnesses.follow_wilson_loops,
            needs=("hamiltonian-with-basis", "declarations", "time-reversal", "electrons"),
            wants=("gap",),
        ),
        Task(
            "chern",
            "count Chern numbers where time reversal is broken",
            steps_witnesses.count_chern_numbers,
            needs=("hamiltonian-with-basis", "declarations", "time-reversal", "electrons"),
            wants=("gap",),
        ),
        Task(
            "group",
            "test every operation of the space group",
            steps_symmetry.check_operations,
            needs=("hamiltonian-with-basis", "bare", "declarations", "space-group", "electrons"),
        ),
        Task(
            "s4",
            "count S4 eigenvalues",
            steps_symmetry.count_s4_eigenvalues,
            needs=(
                "hamiltonian-with-basis",
                "declarations",
                "space-group",
                "time-reversal",
                "electrons",
            ),
        ),
        Task(
            "irreps",
            "label the bands at the special points",
            steps_symmetry.label_irreps,
            needs=(
                "hamiltonian-with-basis",
                "declarations",
                "space-group",
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
    if_there = (
        "space-group",
        "inferred-inversion",
        "symmetry-class",
        "gap",
        "parity",
        "wilson",
        "chern",
        "s4",
        "group",
        "interpolation",
    )
    return (
        Task(
            "verdict",
            "draw the conclusion and raise the flags",
            steps_report.conclude_case,
            needs=(*judged, "shift-test"),
            wants=(*if_there, "inferred-parity"),
            stored=False,
            essential=True,
        ),
        Task(
            "report-material",
            "gather what the report shows",
            steps_report.gather,
            needs=(*judged, "verdict"),
            wants=(*if_there, "irreps", "bands"),
            stored=False,
            essential=True,
        ),
    )
