"""Task functions that settle the Wigner-Seitz shifts, and the sites they rest on."""

from __future__ import annotations

import numpy as np

from topovet.arrays import FloatArray
from topovet.errors import NoInversionError
from topovet.intake.records import HamiltonianFile, WsShifts
from topovet.intake.shifts.centres import read_centres
from topovet.intake.shifts.wsvec import read_wsvec
from topovet.model.assemble import LatticeHamiltonian, assemble
from topovet.model.build_basis import build_basis
from topovet.model.declarations import Declarations
from topovet.model.hamiltonian import TightBindingModel
from topovet.model.ordering import interlacing_order, reorder_shifts
from topovet.model.shift_choice import ShiftProposal, propose_shifts
from topovet.notation import mev
from topovet.pipeline.runner import Context
from topovet.pipeline.task import Task
from topovet.symmetry.inference import infer_inversion
from topovet.symmetry.inversion import build_inversion, measure_inversion
from topovet.symmetry.results import InversionOperator, ShiftTest, SpaceGroup, SpinOrder
from topovet.symmetry.sites import (
    SiteAssignment,
    assign_sites,
    declared_sites,
    nominal_positions,
    relocate_strays,
)


def find_shifts(
    *,
    context: Context,
    hamiltonian: HamiltonianFile,
    interlaced: HamiltonianFile,
    declarations: Declarations,
    spin_order: SpinOrder,
    bare: LatticeHamiltonian,
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
    assumed = None
    if centres is not None and not _all_declared(declarations, n_wann):
        sites = centre_sites(declarations, centres, bare.model, relocate=True)
        assumed = nominal_positions(sites, declarations.crystal) if sites.relocated else None
    return propose_shifts(interlaced, declarations, wsvec, centres, assumed)


def centre_sites(
    declared: Declarations, centres_cart: FloatArray, model: TightBindingModel, *, relocate: bool
) -> SiteAssignment:
    """Where the functions sit by their centres; the hoppings tell the home cells.

    With `relocate`, centres off every atom are put on the atoms without function: a reading that
    only the symmetry of H can confirm.
    """
    crystal = declared.crystal
    sites = assign_sites(centres_cart @ np.linalg.inv(crystal.cell), crystal, model=model)
    return (relocate_strays(sites, crystal, model) if relocate else None) or sites


def sites_in_use(
    declared: Declarations, shifts: ShiftProposal, test: ShiftTest, model: TightBindingModel
) -> SiteAssignment | None:
    """The sites that the adopted shifts rest on; None where nothing says where functions sit."""
    mended, centres = test.adopted == "mended", shifts.centres_cart
    all_declared = _all_declared(declared, model.n_orb)
    if centres is not None and not (mended and all_declared):
        return centre_sites(declared, centres, model, relocate=mended)
    if not all_declared:
        return None
    return declared_sites(np.array([o.position_frac for o in declared.orbitals]), declared.crystal)


def _all_declared(declared: Declarations, n_wann: int) -> bool:
    return len(declared.orbitals) == n_wann


def judge_shifts(
    *,
    context: Context,
    interlaced: HamiltonianFile,
    declarations: Declarations,
    shifts: ShiftProposal,
    space_group: SpaceGroup | None,
    bare: LatticeHamiltonian,
) -> ShiftTest:
    """Where centres look wrong: the shifts that break inversion less, the file's or mended ones."""
    adopted, given, mended = "given", None, None
    reason = ""
    if shifts.elsewhere:
        reason = "The shifts are used as given."
    elif shifts.mended is not None:
        sites = None
        if not shifts.sites_declared and shifts.centres_cart is not None:
            sites = centre_sites(declarations, shifts.centres_cart, bare.model, relocate=True)
        given, mended = (
            _inversion_residual(interlaced, reading, declarations, space_group, sites)
            for reading in (shifts.given, shifts.mended)
        )
        adopted, reason = _better_shifts(given, mended, declared=shifts.sites_declared)
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


def _better_shifts(given: float | None, mended: float | None, *, declared: bool) -> tuple[str, str]:
    if not declared and mended is None:
        return "given", (
            "Nothing is declared and no inversion is found with these functions on the free atoms; "
            "the shifts are used as given."
        )
    if not declared and given is None:
        given = float("inf")
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
    sites: SiteAssignment | None,
) -> float | None:
    """Inversion residual in meV with some shifts; None where it cannot be measured.

    With declared orbitals if there are any, else as inferred with the functions on `sites`.
    """
    if space_group is None or not len(space_group.centres_frac):
        return None
    crystal, spinful = declared.crystal, bool(declared.spinful)
    lattice = assemble(hamiltonian, shifts, crystal.periodic, spinful=spinful)
    centre = space_group.centres_frac[0]
    operator: InversionOperator | None = None
    if sites is not None:
        operator = infer_inversion(lattice.model, crystal, sites, centre, spinful=spinful).operator
    elif declared.orbitals:
        try:
            operator = build_inversion(build_basis(declared.orbitals, crystal), crystal, centre)
        except NoInversionError:
            return None
    if operator is None:
        return None
    test = measure_inversion(lattice.model, lattice.bloch, operator, crystal.periodic)
    return test.violation_mev


TASKS = (
    Task(
        "shifts",
        "read or rebuild the Wigner-Seitz shifts",
        find_shifts,
        needs=("hamiltonian", "interlaced", "declarations", "spin-order", "bare"),
        reads=("wsvec", "centres"),
        stored=False,
        essential=True,
    ),
    Task(
        "shift-test",
        "test suspicious Wannier centres on the Hamiltonian",
        judge_shifts,
        needs=("interlaced", "declarations", "shifts", "bare"),
        wants=("space-group",),
        version=3,
        essential=True,
    ),
)
