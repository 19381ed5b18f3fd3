"""Task functions that compute: inversion, electrons, gap, parity, bands, interpolation."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from topovet.arrays import FloatArray
from topovet.errors import NoInversionError
from topovet.intake.bands import read_bands, read_eig
from topovet.intake.wannier_input.win import read_win
from topovet.invariants.inferred_parity import compute_inferred_parity
from topovet.invariants.parity import compute_parity
from topovet.invariants.results import ParityWitness
from topovet.model.assemble import LatticeHamiltonian
from topovet.model.declarations import Declarations
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.task import NotApplicable, Task
from topovet.spectrum.eigen import mesh_eigenvalues, mesh_solves
from topovet.spectrum.electrons import Statement, choose_statement, count_electrons
from topovet.spectrum.gap import EVEN_BANDS_MEV, choose_mesh, sample_gap
from topovet.spectrum.interpolation import compare_with_files
from topovet.spectrum.path import compute_bands
from topovet.spectrum.results import BandPath, Electrons, GapSample, InterpolationCheck
from topovet.symmetry.inference import InferredInversion
from topovet.symmetry.inversion import build_inversion, measure_inversion, no_inversion
from topovet.symmetry.results import InversionTest, SpaceGroup, TimeReversalTest


def check_inversion(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    space_group: SpaceGroup | None,
    inferred_inversion: InferredInversion | None,
) -> InversionTest:
    """Residual of inversion on the Hamiltonian: as declared, or as inferred where nothing is."""
    declared_centre = declarations.settings.inversion_centre
    if space_group is None:
        return no_inversion("no space group is known")
    if not len(space_group.centres_frac):
        return no_inversion(
            f"space group {space_group.number} ({space_group.symbol}) has no inversion"
        )
    basis, lattice = hamiltonian_with_basis.basis, hamiltonian_with_basis.lattice
    if basis is None:
        return _inferred_test(hamiltonian_with_basis, declarations, inferred_inversion)
    centre = space_group.centres_frac[0] if declared_centre is None else np.array(declared_centre)
    try:
        operator = build_inversion(basis, declarations.crystal, centre)
    except NoInversionError as error:
        return no_inversion(str(error))
    return measure_inversion(lattice.model, lattice.bloch, operator, declarations.crystal.periodic)


def _inferred_test(
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    inferred: InferredInversion | None,
) -> InversionTest:
    reason = f"inversion cannot be built: {hamiltonian_with_basis.reason}"
    if inferred is None:
        return no_inversion(f"{reason}, and it cannot be inferred from the Hamiltonian")
    if inferred.operator is None or inferred.reliability == "refused":
        return no_inversion(f"{reason}; inferred from the Hamiltonian: {inferred.reason}")
    lattice = hamiltonian_with_basis.lattice
    test = measure_inversion(
        lattice.model, lattice.bloch, inferred.operator, declarations.crystal.periodic
    )
    return replace(test, basis="inferred")


@dataclass(frozen=True, slots=True, eq=False)
class MeshEnergies:
    """Energies (n_1, n_2, n_3, n_orb) in eV on a mesh that holds the origin, and solves spent."""

    energies_ev: FloatArray
    n_solves: int


def solve_mesh(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
) -> MeshEnergies:
    """Energies on the mesh that electrons and gap are first judged on."""
    mesh = choose_mesh(declarations.crystal, context.settings["effort"])
    even = time_reversal.present and time_reversal.violation_mev <= EVEN_BANDS_MEV
    energies = mesh_eigenvalues(hamiltonian_with_basis.lattice.bloch, mesh, even=even)
    return MeshEnergies(energies, mesh_solves(mesh, even=even))


def count(
    *,
    context: Context,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    mesh: MeshEnergies,
) -> Electrons:
    """The filling, from the command line or list of cases, case.toml or the .win file."""
    settings, stated = context.settings, declarations.settings
    statements = (
        Statement(
            settings.get("stated_in") or "command line",
            settings.get("filling"),
            settings.get("fermi_ev"),
        ),
        Statement("case.toml", stated.filling, stated.fermi_ev),
        Statement(declarations.win_file, None, declarations.win_fermi_ev),
    )
    known = [s.fermi_ev for s in statements if s.fermi_ev is not None]
    return count_electrons(
        choose_statement(statements),
        known[0] if known else None,
        mesh.energies_ev,
        kramers=time_reversal.present and bool(declarations.spinful),
    )


def look_for_gap(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    mesh: MeshEnergies,
    electrons: Electrons,
) -> GapSample:
    """Direct and indirect gap by mesh and refinement."""
    return sample_gap(
        hamiltonian_with_basis.lattice.bloch,
        mesh.energies_ev,
        electrons.filling,
        n_solves=mesh.n_solves,
    )


def read_parities(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    inversion: InversionTest,
    electrons: Electrons,
    inferred_parity: ParityWitness | None,
) -> ParityWitness:
    """Parities at the TRIM and the indices that follow, inferred where none are declared."""
    basis = hamiltonian_with_basis.basis
    if not inversion.present:
        raise NotApplicable(inversion.reason)
    if basis is None:
        if inferred_parity is None:
            raise NotApplicable(hamiltonian_with_basis.reason)
        return inferred_parity
    operator = build_inversion(basis, declarations.crystal, np.array(inversion.centre))
    return compute_parity(
        hamiltonian_with_basis.lattice.bloch,
        operator,
        electrons.filling,
        declarations.crystal.periodic,
        kramers=time_reversal.present and hamiltonian_with_basis.lattice.model.spinful,
    )


def read_inferred_parities(
    *,
    context: Context,
    lattice: LatticeHamiltonian,
    declarations: Declarations,
    time_reversal: TimeReversalTest,
    electrons: Electrons,
    inferred_inversion: InferredInversion,
) -> ParityWitness:
    """Parities about the inferred inversion: what they would say were nothing declared."""
    if inferred_inversion.operator is None or inferred_inversion.reliability == "refused":
        raise NotApplicable(inferred_inversion.reason)
    return compute_inferred_parity(
        lattice.bloch,
        inferred_inversion,
        electrons.filling,
        declarations.crystal.periodic,
        kramers=time_reversal.present and lattice.model.spinful,
    )


def follow_bands(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    declarations: Declarations,
) -> BandPath:
    """Bands along the lattice's special points."""
    return compute_bands(hamiltonian_with_basis.lattice.bloch, declarations.crystal)


def compare_energies(
    *,
    context: Context,
    hamiltonian_with_basis: BasedHamiltonian,
    electrons: Electrons,
) -> InterpolationCheck:
    """Differences to the energies in `.eig` and `_band.dat`."""
    files = context.files
    mesh_k = mesh_energies = path_k = path_energies = None
    if files.eig is not None and files.win is not None:
        mesh_k = read_win(files.win).kpoints_frac
        mesh_energies = read_eig(files.eig).energies_ev
        if mesh_k is None or len(mesh_k) != len(mesh_energies):
            mesh_k = mesh_energies = None
    if files.band is not None and files.band_kpt is not None:
        bands = read_bands(files.band, files.band_kpt)
        if bands.energies_ev.shape[1] == hamiltonian_with_basis.lattice.bloch.n_orb:
            path_k, path_energies = bands.k_frac, bands.energies_ev
    if mesh_k is None and path_k is None:
        raise NotApplicable("no .eig or _band.dat file that fits the Hamiltonian is there")
    return compare_with_files(
        hamiltonian_with_basis.lattice.bloch,
        electrons.filling,
        mesh_k=mesh_k,
        mesh_energies=mesh_energies,
        path_k=path_k,
        path_energies=path_energies,
    )


TASKS = (
    Task(
        "inversion",
        "test inversion on the Hamiltonian",
        check_inversion,
        needs=("hamiltonian-with-basis", "declarations"),
        wants=("space-group", "inferred-inversion"),
        essential=True,
    ),
    Task(
        "mesh",
        "solve for the energies on a mesh",
        solve_mesh,
        needs=("hamiltonian-with-basis", "declarations", "time-reversal"),
        settings=("effort",),
        stored=False,
        essential=True,
    ),
    Task(
        "electrons",
        "settle the filling",
        count,
        needs=("declarations", "time-reversal", "mesh"),
        settings=("filling", "fermi_ev", "stated_in"),
        essential=True,
    ),
    Task(
        "gap",
        "look for the smallest gaps",
        look_for_gap,
        needs=("hamiltonian-with-basis", "mesh", "electrons"),
        version=3,
    ),
    Task(
        "inferred-parity",
        "count parities about the inferred inversion",
        read_inferred_parities,
        needs=(
            "lattice",
            "declarations",
            "time-reversal",
            "electrons",
            "inferred-inversion",
        ),
        version=2,
    ),
    Task(
        "parity",
        "count parities at the TRIM",
        read_parities,
        needs=(
            "hamiltonian-with-basis",
            "declarations",
            "time-reversal",
            "inversion",
            "electrons",
        ),
        wants=("inferred-parity",),
        version=2,
    ),
    Task(
        "bands",
        "follow the bands along the special points",
        follow_bands,
        needs=("hamiltonian-with-basis", "declarations"),
    ),
    Task(
        "interpolation",
        "compare with the energies that came along",
        compare_energies,
        needs=("hamiltonian-with-basis", "electrons"),
        reads=("win", "eig", "band", "band_kpt"),
    ),
)
