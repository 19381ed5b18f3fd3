"""Task functions that read the case: Hamiltonian, declarations, shifts, audit."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from topovet.errors import InputError
from topovet.intake.audit import audit_hamiltonian
from topovet.intake.audit_results import HamiltonianAudit
from topovet.intake.case_toml import read_settings
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.hamiltonian.tb import read_tb
from topovet.intake.records import CaseSettings, HamiltonianFile
from topovet.intake.structure import read_structure
from topovet.intake.wannier_input.win import read_win
from topovet.model.assemble import LatticeHamiltonian, assemble
from topovet.model.basis import OrbitalBasis
from topovet.model.build_basis import build_basis
from topovet.model.decay import DecayProfile, measure_decay
from topovet.model.declarations import Declarations, declare
from topovet.model.ordering import interlacing_order, reorder_hamiltonian
from topovet.model.shift_choice import ShiftProposal
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_shifts import sites_in_use
from topovet.pipeline.task import NotApplicable, Task
from topovet.symmetry.results import ShiftTest, SpaceGroup, SpinOrder, TimeReversalTest
from topovet.symmetry.spacegroup import SymmetrySearchError, find_space_group
from topovet.symmetry.time_reversal import find_spin_order, infer_spin, measure_time_reversal


@dataclass(frozen=True, slots=True, eq=False)
class BasedHamiltonian:
    """Hamiltonian with its orbital basis in the same order.

    `basis` is None where no projections are declared, and `reason` says why.
    """

    lattice: LatticeHamiltonian
    basis: OrbitalBasis | None
    reason: str


def read_hamiltonian(*, context: Context) -> HamiltonianFile:
    """H(R) from `_hr.dat`, or from `_tb.dat` where there is no other."""
    files = context.files
    if files.hr is not None:
        return read_hr(files.hr)
    if files.tb is not None:
        return read_tb(files.tb)
    raise InputError(
        files.folder,
        found="no Hamiltonian",
        expected="NAME_hr.dat or NAME_tb.dat",
        todo="give the folder of a Wannier90 run with write_hr = true",
    )


def read_declarations(*, context: Context, hamiltonian: HamiltonianFile) -> Declarations:
    """The small files, brought together; the spin is inferred where no .win file states it."""
    files = context.files
    declared = declare(
        files,
        hamiltonian,
        None if files.win is None else read_win(files.win),
        None if files.structure is None else read_structure(files.structure),
        _stated_settings(context),
    )
    if declared.spinful is not None:
        return declared
    lattice = assemble(hamiltonian, None, declared.crystal.periodic, spinful=True)
    spinful = infer_spin(lattice.bloch)
    if spinful is None:
        raise InputError(
            files.folder,
            found="no .win file, and a Hamiltonian that may be spinless or spinful",
            expected="spinors = true or false",
            todo=f"add {files.seedname}.win, if need be with nothing but num_wann and spinors",
        )
    return replace(declared, spinful=spinful)


def _stated_settings(context: Context) -> CaseSettings:
    """case.toml, where the options of the run do not say otherwise."""
    files, options = context.files, context.settings
    settings = CaseSettings() if files.settings is None else read_settings(files.settings)
    centre = options.get("inversion_centre")
    return replace(
        settings,
        name=options.get("name") or settings.name,
        dimension=options.get("dimension") or settings.dimension,
        inversion_centre=settings.inversion_centre
        if centre is None
        else (float(centre[0]), float(centre[1]), float(centre[2])),
    )


def read_without_shifts(
    *, context: Context, hamiltonian: HamiltonianFile, declarations: Declarations
) -> LatticeHamiltonian:
    """H(k) in the file's own order, bare R vectors: exact on the mesh."""
    return assemble(
        hamiltonian, None, declarations.crystal.periodic, spinful=bool(declarations.spinful)
    )


def settle_spin_order(
    *, context: Context, declarations: Declarations, unshifted: LatticeHamiltonian
) -> SpinOrder:
    """Interlaced or block: which of them has time reversal."""
    return find_spin_order(
        unshifted.bloch, declarations.crystal.periodic, spinful=bool(declarations.spinful)
    )


def interlace(
    *, context: Context, hamiltonian: HamiltonianFile, spin_order: SpinOrder
) -> HamiltonianFile:
    """The file's H(R) with spin interlaced."""
    if spin_order.found != "block":
        return hamiltonian
    return reorder_hamiltonian(hamiltonian, interlacing_order(hamiltonian.n_wann))


def read_interlaced_without_shifts(
    *,
    context: Context,
    interlaced: HamiltonianFile,
    declarations: Declarations,
    spin_order: SpinOrder,
    unshifted: LatticeHamiltonian,
) -> LatticeHamiltonian:
    """The reading on bare R vectors with spin interlaced: what the shifts cannot have spoilt."""
    if spin_order.found != "block":
        return unshifted
    return assemble(interlaced, None, declarations.crystal.periodic, spinful=True)


def search_space_group(*, context: Context, declarations: Declarations) -> SpaceGroup:
    """spglib's space group for the input cell."""
    try:
        return find_space_group(declarations.crystal)
    except SymmetrySearchError as error:
        raise NotApplicable(str(error)) from error


def audit(
    *,
    context: Context,
    hamiltonian: HamiltonianFile,
    declarations: Declarations,
    shifts: ShiftProposal,
    shift_test: ShiftTest,
) -> HamiltonianAudit:
    """Soundness of the file, before anything is mended."""
    mended = shift_test.adopted == "mended"
    return audit_hamiltonian(
        hamiltonian,
        mp_grid=declarations.mp_grid,
        shift_source="rebuilt from centres" if mended else shifts.source,
        shift_note=shift_test.reason if mended else shifts.note,
        centre_offsets=shifts.offsets_ang,
    )


def assemble_lattice(
    *,
    context: Context,
    interlaced: HamiltonianFile,
    declarations: Declarations,
    shifts: ShiftProposal,
    shift_test: ShiftTest,
) -> LatticeHamiltonian:
    """H(R) and H(k) as they are used from here on."""
    chosen = shifts.mended if shift_test.adopted == "mended" else shifts.given
    return assemble(
        interlaced, chosen, declarations.crystal.periodic, spinful=bool(declarations.spinful)
    )


def profile_decay(
    *,
    context: Context,
    declarations: Declarations,
    lattice: LatticeHamiltonian,
    shifts: ShiftProposal,
    shift_test: ShiftTest,
) -> DecayProfile:
    """Fall-off of the hoppings with distance."""
    crystal, model = declarations.crystal, lattice.model
    declared = np.array([o.position_frac for o in declarations.orbitals])
    if len(declared) == model.n_orb:
        return measure_decay(model, crystal, declared, declarations.mp_grid)
    sites = sites_in_use(declarations, shifts, shift_test, model)
    at = None if sites is None else sites.function_positions
    return measure_decay(model, crystal, at, declarations.mp_grid, positions="Wannier centres")


def check_time_reversal(
    *,
    context: Context,
    declarations: Declarations,
    shifts: ShiftProposal,
    lattice: LatticeHamiltonian,
    bare: LatticeHamiltonian,
) -> TimeReversalTest:
    """Time reversal, judged on the reading without shifts."""
    unshifted = None if shifts.given is None else bare.bloch
    periodic = declarations.crystal.periodic
    return measure_time_reversal(lattice.model, lattice.bloch, periodic, unshifted=unshifted)


def attach_basis(
    *, context: Context, declarations: Declarations, lattice: LatticeHamiltonian
) -> BasedHamiltonian:
    """Declared orbitals beside the Hamiltonian."""
    declared, n_orb = declarations.orbitals, lattice.model.n_orb
    if not declared:
        return BasedHamiltonian(lattice, None, declarations.undeclared_reason)
    if len(declared) != n_orb:
        reason = f"{len(declared)} projections are declared for {n_orb} Wannier functions"
        return BasedHamiltonian(lattice, None, reason)
    return BasedHamiltonian(lattice, build_basis(declared, declarations.crystal), "")


TASKS = (
    Task(
        "hamiltonian",
        "read H(R)",
        read_hamiltonian,
        reads=("hr", "tb"),
        stored=False,
        essential=True,
    ),
    Task(
        "declarations",
        "bring cell, atoms, projections and settings together",
        read_declarations,
        needs=("hamiltonian",),
        reads=("win", "structure", "settings"),
        settings=("name", "dimension", "inversion_centre"),
        version=2,
        essential=True,
    ),
    Task(
        "space-group",
        "find the space group of the structure",
        search_space_group,
        needs=("declarations",),
    ),
    Task(
        "unshifted",
        "assemble H(k) on the bare R vectors",
        read_without_shifts,
        needs=("hamiltonian", "declarations"),
        stored=False,
        essential=True,
    ),
    Task(
        "spin-order",
        "find the order of the spinors",
        settle_spin_order,
        needs=("declarations", "unshifted"),
        version=2,
        essential=True,
    ),
    Task(
        "interlaced",
        "bring spinors to one order",
        interlace,
        needs=("hamiltonian", "spin-order"),
        stored=False,
        essential=True,
    ),
    Task(
        "bare",
        "the bare R vectors with spinors in one order",
        read_interlaced_without_shifts,
        needs=("interlaced", "declarations", "spin-order", "unshifted"),
        stored=False,
        essential=True,
    ),
    Task(
        "audit",
        "measure the soundness of the files",
        audit,
        needs=("hamiltonian", "declarations", "shifts", "shift-test"),
        version=3,
        essential=True,
    ),
    Task(
        "lattice",
        "assemble H(R) and H(k)",
        assemble_lattice,
        needs=("interlaced", "declarations", "shifts", "shift-test"),
        stored=False,
        essential=True,
    ),
    Task(
        "decay",
        "follow the hoppings out to the rim",
        profile_decay,
        needs=("declarations", "lattice", "shifts", "shift-test"),
        version=2,
        essential=True,
    ),
    Task(
        "time-reversal",
        "test time reversal",
        check_time_reversal,
        needs=("declarations", "shifts", "lattice", "bare"),
        essential=True,
    ),
    Task(
        "hamiltonian-with-basis",
        "attach the declared orbitals",
        attach_basis,
        needs=("declarations", "lattice"),
        stored=False,
        essential=True,
    ),
)
