"""Task functions that read the case: Hamiltonian, declarations, shifts, audit."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from topovet.errors import InputError, NoInversionError
from topovet.intake.audit import audit_hamiltonian
from topovet.intake.audit_results import HamiltonianAudit
from topovet.intake.case_toml import read_settings
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.hamiltonian.tb import read_tb
from topovet.intake.records import CaseSettings, HamiltonianFile, WsShifts
from topovet.intake.shifts.centres import read_centres
from topovet.intake.shifts.wsvec import read_wsvec
from topovet.intake.structure import read_structure
from topovet.intake.wannier_input.win import read_win
from topovet.model.assemble import LatticeHamiltonian, assemble
from topovet.model.basis import OrbitalBasis
from topovet.model.build_basis import build_basis
from topovet.model.decay import DecayProfile, measure_decay
from topovet.model.declarations import Declarations, declare
from topovet.model.ordering import interlacing_order, reorder_hamiltonian, reorder_shifts
from topovet.model.shift_choice import ShiftProposal, propose_shifts
from topovet.notation import mev
from topovet.pipeline.runner import Context
from topovet.pipeline.task import NotApplicable, Task
from topovet.symmetry.inversion import build_inversion, measure_inversion
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
        CaseSettings() if files.settings is None else read_settings(files.settings),
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


def find_shifts(
    *,
    context: Context,
    hamiltonian: HamiltonianFile,
    interlaced: HamiltonianFile,
    declarations: Declarations,
    spin_order: SpinOrder,
) -> ShiftProposal:
    """Wigner-Seitz shifts from the file, or rebuilt; for interlaced spin."""
    files, n_wann = context.files, hamiltonian.n_wann
    in_block = spin_order.found == "block"
    order = interlacing_order(n_wann) if in_block else np.arange(n_wann)
    centres = interlaced.centres_cart
    if files.centres is not None:
        centres = read_centres(files.centres, n_wann).centres_cart[order]
    wsvec = None
    if files.wsvec is not None:
        wsvec = read_wsvec(files.wsvec, hamiltonian, mp_grid=declarations.mp_grid)
        wsvec = reorder_shifts(wsvec, order) if in_block else wsvec
    return propose_shifts(interlaced, declarations, wsvec, centres)


def search_space_group(*, context: Context, declarations: Declarations) -> SpaceGroup:
    """spglib's space group for the input cell."""
    try:
        return find_space_group(declarations.crystal)
    except SymmetrySearchError as error:
        raise NotApplicable(str(error)) from error


def judge_shifts(
    *,
    context: Context,
    interlaced: HamiltonianFile,
    declarations: Declarations,
    shifts: ShiftProposal,
    space_group: SpaceGroup | None,
) -> ShiftTest:
    """Where centres look wrong: the shifts that break inversion less, the file's or mended ones."""
    adopted, given, mended = "given", None, None
    reason = ""
    if shifts.elsewhere:
        reason = "The shifts are used as given."
    elif shifts.mended is not None:
        given, mended = (
            _inversion_residual(interlaced, reading, declarations, space_group)
            for reading in (shifts.given, shifts.mended)
        )
        adopted, reason = _better_shifts(given, mended)
    origin = shifts.origin_shift_frac
    return ShiftTest(
        adopted,
        shifts.suspects,
        shifts.elsewhere,
        given,
        mended,
        reason,
        None if origin is None else (float(origin[0]), float(origin[1]), float(origin[2])),
    )


def _better_shifts(given: float | None, mended: float | None) -> tuple[str, str]:
    if given is None or mended is None:
        return "mended", (
            "Without inversion the shifts cannot be told apart by symmetry; they were rebuilt with "
            "every centre on its declared site."
        )
    if mended < given:
        return "mended", (
            "With the shifts rebuilt from the sites the inversion residual falls from "
            f"{mev(given)} to {mev(mended)}; that reading is used."
        )
    return "given", (
        f"The shifts as given keep inversion to {mev(given)}, rebuilt from the sites to "
        f"{mev(mended)}; they are used as given."
    )


def _inversion_residual(
    hamiltonian: HamiltonianFile,
    shifts: WsShifts | None,
    declared: Declarations,
    space_group: SpaceGroup | None,
) -> float | None:
    """Inversion residual in meV with some shifts; None where it cannot be measured."""
    if space_group is None or not len(space_group.centres_frac) or not declared.orbitals:
        return None
    crystal = declared.crystal
    try:
        basis = build_basis(declared.orbitals, crystal)
        operator = build_inversion(basis, crystal, space_group.centres_frac[0])
    except NoInversionError:
        return None
    lattice = assemble(hamiltonian, shifts, crystal.periodic, spinful=bool(declared.spinful))
    test = measure_inversion(lattice.model, lattice.bloch, operator, crystal.periodic)
    return test.violation_mev


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
    *, context: Context, declarations: Declarations, lattice: LatticeHamiltonian
) -> DecayProfile:
    """Fall-off of the hoppings with distance."""
    sites = np.array([o.position_frac for o in declarations.orbitals])
    fits = len(sites) == lattice.model.n_orb
    return measure_decay(
        lattice.model, declarations.crystal, sites if fits else None, declarations.mp_grid
    )


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
        "shifts",
        "read or rebuild the Wigner-Seitz shifts",
        find_shifts,
        needs=("hamiltonian", "interlaced", "declarations", "spin-order"),
        reads=("wsvec", "centres"),
        stored=False,
        essential=True,
    ),
    Task(
        "shift-test",
        "test suspicious Wannier centres on the Hamiltonian",
        judge_shifts,
        needs=("interlaced", "declarations", "shifts"),
        wants=("space-group",),
        version=2,
        essential=True,
    ),
    Task(
        "audit",
        "measure the soundness of the files",
        audit,
        needs=("hamiltonian", "declarations", "shifts", "shift-test"),
        version=2,
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
        needs=("declarations", "lattice"),
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
