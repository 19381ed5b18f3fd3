"""The same case with its Hamiltonian symmetrised, written as a case and vetted beside the first."""

from __future__ import annotations

import json
import shutil
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from topovet.errors import UndefinedError
from topovet.notation import mev
from topovet.pipeline.dossier import Dossier, start_run, vet_case
from topovet.pipeline.runner import Observer, Run
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.store import write_atomically
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import build_operator, with_time_reversal
from topovet.symmetry.results import SpaceGroup
from topovet.symmetry.symmetrise import Symmetrisation, symmetrise, write_symmetrised
from topovet.symmetry.time_reversal import sampled_k

COMPANIONS = ("win", "structure", "eig")
"""Files that hold for the symmetrised Hamiltonian too; shifts and old interpolations do not."""


@dataclass(frozen=True, slots=True)
class SymmetrisedDossier:
    """The dossier of the symmetrised Hamiltonian, and what symmetrising it took."""

    dossier: Dossier
    symmetrisation: Symmetrisation
    sentence: str


def vet_symmetrised(
    case: str | Path,
    *,
    out: Path,
    settings: Mapping[str, Any] | None = None,
    observe: Observer = lambda event, text: None,
) -> SymmetrisedDossier:
    """Average H over the structure's group and time reversal, write it as a case, vet that.

    The case goes to `out`/case, its dossier to `out`; the original dossier is not touched.

    Parameters
    ----------
    case, settings
        As given for the original.
    out
        Folder for the symmetrised dossier.

    Raises
    ------
    UndefinedError
        There are no declared orbitals or no space group to average with.
    TopovetError
        As for any case.
    """
    run = start_run(case, settings=settings, observe=observe)
    made = _symmetrise(run)
    folder = _write_case(run, made, out / "case")
    _write_record(made, out / "symmetrisation.json")
    own = {**(settings or {}), "filling": None, "fermi_ev": None, "spinless": _companion(run)}
    dossier = vet_case(folder, out=out, settings=own, observe=observe)
    sentence = (
        f"symmetrised over {made.n_operations} operations: H(k) moved by at most "
        f"{mev(made.distance_mev)} on the sampled k, the largest violation fell from "
        f"{mev(max(made.before_mev))} to {mev(max(made.after_mev))}."
    )
    return SymmetrisedDossier(dossier, made, sentence)


def _companion(run: Run) -> str | None:
    """The Hamiltonian of the spinless companion, which serves the symmetrised case as it is."""
    files = run.files.spinless
    named = None if files is None else files.hr or files.tb
    return None if named is None else str(Path(named).absolute())


def _symmetrise(run: Run) -> Symmetrisation:
    based: BasedHamiltonian = run.result("hamiltonian-with-basis")
    group: SpaceGroup | None = run.result("space-group")
    if based.basis is None or group is None:
        raise UndefinedError(
            "cannot symmetrise: "
            + (based.reason if based.basis is None else "no space group is known")
        )
    crystal = run.result("declarations").crystal
    built = build_operators(based.basis, crystal, group.rotations, group.translations)
    reversal = None
    if run.result("time-reversal").present:
        neutral = build_operator(based.basis, crystal, group.rotations[0], group.translations[0])
        reversal = with_time_reversal(neutral, based.basis)
    lattice = based.lattice
    with one_blas_thread():
        return symmetrise(
            lattice.model,
            lattice.bloch,
            built.operators,
            sampled_k(crystal.periodic),
            time_reversal=reversal,
        )


def _write_case(run: Run, made: Symmetrisation, folder: Path) -> Path:
    """The symmetrised Hamiltonian with the companions that still hold for it."""
    files, name = run.files, run.files.seedname
    folder.mkdir(parents=True, exist_ok=True)
    write_symmetrised(folder / f"{name}_hr.dat.gz", made.model)
    for role in COMPANIONS:
        path = getattr(files, role)
        if path is not None:
            shutil.copyfile(path, folder / Path(path).name)
    declared, electrons = run.result("declarations"), run.result("electrons")
    lines = [
        f"name = {json.dumps(declared.name + ' symmetrised', ensure_ascii=False)}",
        f"filling = {electrons.filling}",
        f"dimension = {declared.crystal.dimension}",
    ]
    if declared.settings.inversion_centre is not None:
        lines.append(f"inversion_centre = {list(declared.settings.inversion_centre)}")
    write_atomically(folder / "case.toml", ("\n".join(lines) + "\n").encode())
    return folder


def _write_record(made: Symmetrisation, path: Path) -> None:
    record = {
        "n_operations": made.n_operations,
        "distance_meV": made.distance_mev,
        "distance_real_space_meV": made.distance_r_mev,
        "distance_bound_meV": made.distance_bound_mev,
        "violations_before_meV": list(made.before_mev),
        "violations_after_meV": list(made.after_mev),
    }
    write_atomically(path, (json.dumps(record, indent=1) + "\n").encode())
