"""Task functions on the symmetry of the Hamiltonian beyond inversion."""

from __future__ import annotations

import numpy as np

from topovet.errors import NoInversionError
from topovet.invariants.band_irreps import compute_band_irreps
from topovet.invariants.irrep_results import PointIrreps
from topovet.invariants.rotation_indicators import S4Indicator, compute_s4_indicator
from topovet.model.assemble import LatticeHamiltonian
from topovet.model.declarations import Declarations
from topovet.model.shift_choice import ShiftProposal
from topovet.notation import mev
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.steps_shifts import sites_in_use
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.eigen import one_blas_thread
from topovet.spectrum.results import Electrons
from topovet.symmetry.az_class import AzClass, find_az_class
from topovet.symmetry.declaration_check import EXPLAINS, SOUND_MEV, compare_declaration
from topovet.symmetry.declaration_results import DeclarationCheck
from topovet.symmetry.group import measure_group
from topovet.symmetry.group_results import GroupTest
from topovet.symmetry.inference import InferredInversion, infer_inversion
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import WannierOperator, with_time_reversal
from topovet.symmetry.results import InversionTest, ShiftTest, SpaceGroup, TimeReversalTest
from topovet.symmetry.sites import SiteAssignment, settle_homes


def infer_from_hamiltonian(
    *,
    context: Context,
    lattice: LatticeHamiltonian,
    declarations: Declarations,
    shifts: ShiftProposal,
    shift_test: ShiftTest,
    space_group: SpaceGroup,
) -> InferredInversion:
    """Inversion from H(R) and the centres alone, beside what is declared or in its place."""
    crystal, model = declarations.crystal, lattice.model
    if not len(space_group.centres_frac):
        raise NotApplicable(
            f"space group {space_group.number} ({space_group.symbol}) has no inversion"
        )
    sites = sites_in_use(declarations, shifts, shift_test, model)
    if sites is None:
        raise NotApplicable("neither declared sites nor Wannier centres say where functions sit")
    declared_centre = declarations.settings.inversion_centre
    centre = space_group.centres_frac[0] if declared_centre is None else np.array(declared_centre)
    try:
        return infer_inversion(model, crystal, sites, centre, spinful=model.spinful)
    except NoInversionError as error:
        raise NotApplicable(str(error)) from error


def check_declaration(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    shifts: ShiftProposal,
    shift_test: ShiftTest,
    space_group: SpaceGroup,
    inversion: InversionTest,
) -> DeclarationCheck:
    """Where declared inversion fails: other readings of the declaration, other centres."""
    basis, crystal = hamiltonian_with_basis.basis, declarations.crystal
    if basis is None:
        raise NotApplicable(f"nothing is declared: {hamiltonian_with_basis.reason}")
    if not len(space_group.centres_frac):
        raise NotApplicable("the structure has no inversion to test the declaration with")
    residual = inversion.violation_r_mev
    if residual is not None and residual <= SOUND_MEV:
        raise NotApplicable(f"declared inversion holds to {mev(residual)}")
    lattice = hamiltonian_with_basis.lattice
    sites = sites_in_use(declarations, shifts, shift_test, lattice.model)
    assert sites is not None  # there is a basis, so all orbitals are declared
    stated = declarations.settings.inversion_centre
    centre = space_group.centres_frac[0] if stated is None else np.array(stated)

    def compare(assignment: SiteAssignment) -> DeclarationCheck:
        return compare_declaration(
            lattice,
            crystal,
            basis,
            assignment,
            centre,
            space_group.centres_frac,
            spinful=lattice.model.spinful,
        )

    check = compare(sites)
    if check.corrections or _is_explained(check) or sites.source == "centres":
        return check
    rehomed = settle_homes(sites, crystal, lattice.model, doubt_cells=0.5)
    if not rehomed.rehomed:
        return check
    moved = compare(rehomed)
    return moved if moved.inferred_fit.worst_mev < check.inferred_fit.worst_mev else check


def _is_explained(check: DeclarationCheck) -> bool:
    """Inferred inversion holds where the declared one does not."""
    fits = check.inferred_fit.worst_mev <= EXPLAINS * check.declared.worst_mev
    return check.inferred.reliability == "good" and fits


def find_symmetry_class(
    *,
    context: Context,
    lattice: LatticeHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
) -> AzClass:
    """Altland-Zirnbauer class, and which invariants can exist."""
    return find_az_class(lattice.model, lattice.bloch, time_reversal, declarations.crystal.periodic)


def check_operations(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    bare: LatticeHamiltonian,
    declarations: Declarations,
    space_group: SpaceGroup,
    electrons: Electrons,
) -> GroupTest:
    """Which operations of the structure the Hamiltonian has, and which more."""
    lattice, basis = hamiltonian_with_basis.lattice, hamiltonian_with_basis.basis
    if basis is None:
        raise NotApplicable(f"no operators can be built: {hamiltonian_with_basis.reason}")
    with one_blas_thread():
        return measure_group(
            lattice.model,
            lattice.bloch,
            bare.bloch,
            basis,
            declarations.crystal,
            space_group,
            declarations.mp_grid,
            filling=electrons.filling,
        )


def label_irreps(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    space_group: SpaceGroup,
    time_reversal: TimeReversalTest,
    inversion: InversionTest,
    electrons: Electrons,
) -> tuple[PointIrreps, ...]:
    """Irreps of the bands at the special points, by characters."""
    operators = _operators(hamiltonian_with_basis, declarations, space_group)
    if time_reversal.present:
        assert hamiltonian_with_basis.basis is not None
        basis = hamiltonian_with_basis.basis
        operators += [with_time_reversal(operator, basis) for operator in operators]
    lattice = hamiltonian_with_basis.lattice
    return compute_band_irreps(
        lattice.bloch,
        operators,
        declarations.crystal,
        spinful=lattice.model.spinful,
        filling=electrons.filling,
        centre_frac=None if inversion.centre is None else np.array(inversion.centre),
    )


def count_s4_eigenvalues(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    space_group: SpaceGroup,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
) -> S4Indicator:
    """The S4 indicator, which needs no inversion."""
    operators = _operators(hamiltonian_with_basis, declarations, space_group)
    lattice = hamiltonian_with_basis.lattice
    indicator = compute_s4_indicator(
        lattice.bloch,
        operators,
        declarations.crystal,
        electrons.filling,
        kramers=time_reversal.present and lattice.model.spinful,
    )
    if indicator.status == "not-applicable":
        raise NotApplicable(indicator.reason)
    return indicator


def _operators(
    based: BasedHamiltonian, declared: Declarations, space_group: SpaceGroup
) -> list[WannierOperator]:
    """All operations of the structure on the Wannier functions."""
    if based.basis is None:
        raise NotApplicable(f"no operators can be built: {based.reason}")
    built = build_operators(
        based.basis, declared.crystal, space_group.rotations, space_group.translations
    )
    if len(built.operators) < len(space_group.rotations):
        missing = next(iter(built.reasons.values()))
        raise NotApplicable(f"the declared orbitals are not closed under the group: {missing}")
    return list(built.operators)


TASKS = (
    Task(
        "inferred-inversion",
        "infer inversion from the Hamiltonian itself",
        infer_from_hamiltonian,
        needs=("lattice", "declarations", "shifts", "shift-test", "space-group"),
        version=2,
    ),
    Task(
        "declaration-check",
        "look for what mends the declared orbitals",
        check_declaration,
        needs=(
            "hamiltonian-with-basis",
            "declarations",
            "shifts",
            "shift-test",
            "space-group",
            "inversion",
        ),
    ),
    Task(
        "symmetry-class",
        "find the Altland-Zirnbauer class",
        find_symmetry_class,
        needs=("lattice", "declarations", "time-reversal"),
    ),
    Task(
        "group",
        "test every operation of the space group",
        check_operations,
        needs=("hamiltonian-with-basis", "bare", "declarations", "space-group", "electrons"),
    ),
    Task(
        "s4",
        "count S4 eigenvalues",
        count_s4_eigenvalues,
        needs=(
            "hamiltonian-with-basis",
            "declarations",
            "space-group",
            "time-reversal",
            "electrons",
        ),
        version=2,
    ),
    Task(
        "irreps",
        "label the bands at the special points",
        label_irreps,
        needs=(
            "hamiltonian-with-basis",
            "declarations",
            "space-group",
            "time-reversal",
            "inversion",
            "electrons",
        ),
    ),
)
