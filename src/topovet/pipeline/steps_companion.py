"""Task functions for the spinless companion: read it, and tell whether it fits its case."""

from __future__ import annotations

from dataclasses import replace

from topovet.deformation.companion import CompanionTest, compare_companion, coupling_between
from topovet.deformation.comparison import EndMember
from topovet.model.declarations import Declarations
from topovet.model.fourier import BlochSum
from topovet.model.spin_parts import spin_frame
from topovet.pipeline import steps_intake, steps_shifts
from topovet.pipeline.graph import build_graph
from topovet.pipeline.inputs import OF_COMPANION, SPINLESS, case_paths, shown_name
from topovet.pipeline.runner import Context, Run
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.steps_tipping import inversion_beyond, inversion_in_use
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.results import Electrons, GapSample
from topovet.symmetry.inference import InferredInversion
from topovet.symmetry.results import InversionTest


def read_companion(
    *, context: Context, declarations: Declarations, electrons: Electrons
) -> EndMember:
    """The companion as its files give it, read as any case is; no electrons are counted.

    Its filling is what its own case.toml says, else half of the case's.
    """
    files = context.files.spinless
    if files is None:
        raise NotApplicable("no spinless companion is named")
    run = Run(
        graph=build_graph((*steps_intake.TASKS, *steps_shifts.TASKS)),
        files=files,
        inputs=(),
        settings={"dimension": declarations.crystal.dimension},
    )
    declared = run.result("declarations")
    based: BasedHamiltonian = run.result("hamiltonian-with-basis")
    stated = declared.settings.filling
    hamiltonian = next(path for role, path in case_paths(files) if role in ("hr", "tb"))
    return EndMember(
        name=shown_name(SPINLESS, hamiltonian),
        crystal=declared.crystal,
        basis=based.basis,
        model=based.lattice.model,
        filling=electrons.filling // 2 if stated is None else stated,
        time_reversal=run.result("time-reversal").present,
        inversion=None,
    )


def judge_companion(
    *,
    context: Context,
    spinless_hamiltonian: EndMember | None,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    electrons: Electrons,
    inversion: InversionTest,
    inferred_inversion: InferredInversion | None,
    gap: GapSample | None,
) -> CompanionTest:
    """Whether the companion is written in the functions of the case and has its symmetries."""
    if spinless_hamiltonian is None:
        raise NotApplicable("no spinless companion is named")
    if not hamiltonian_with_basis.lattice.model.spinful:
        raise NotApplicable("the case itself is spinless")
    operator = None
    if inversion.present and not inversion_beyond(inversion, gap):  # else no parity is asked
        operator = inversion_in_use(
            hamiltonian_with_basis, declarations, inversion, inferred_inversion
        )
    return compare_companion(
        replace(_end(hamiltonian_with_basis, declarations, electrons), inversion=operator),
        spinless_hamiltonian,
        spin_frame(hamiltonian_with_basis.basis),
        smallest_gap_ev=None if gap is None else gap.direct_ev,
    )


def take_difference(
    *,
    context: Context,
    spinless_hamiltonian: EndMember,
    spinless_companion: CompanionTest,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    electrons: Electrons,
) -> BlochSum:
    """V(k) = H(k) - H0(k) x 1, eV."""
    if not spinless_companion.fits:
        raise NotApplicable(f"the companion does not fit: {spinless_companion.reason}")
    case = _end(hamiltonian_with_basis, declarations, electrons)
    return coupling_between(case, spinless_hamiltonian, spin_frame(case.basis))


def _end(based: BasedHamiltonian, declared: Declarations, electrons: Electrons) -> EndMember:
    """The case as one side of a comparison; what is asked of it has time reversal."""
    return EndMember(
        name=declared.name,
        crystal=declared.crystal,
        basis=based.basis,
        model=based.lattice.model,
        filling=electrons.filling,
        time_reversal=True,
        inversion=None,
    )


TASKS = (
    Task(
        "spinless-hamiltonian",
        "read the companion without spin-orbit coupling",
        read_companion,
        needs=("declarations", "electrons"),
        reads=tuple(SPINLESS + role for role in OF_COMPANION),
        stored=False,
    ),
    Task(
        "spinless-companion",
        "test whether that companion fits the case",
        judge_companion,
        needs=("hamiltonian-with-basis", "declarations", "electrons", "inversion"),
        # not needed: whether there is one shall be in the store
        wants=("spinless-hamiltonian", "inferred-inversion", "gap"),
    ),
    Task(
        "spinless-difference",
        "take the companion from H",
        take_difference,
        needs=(
            "spinless-hamiltonian",
            "spinless-companion",
            "hamiltonian-with-basis",
            "declarations",
            "electrons",
        ),
        stored=False,
    ),
)
