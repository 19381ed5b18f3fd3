"""The clean cases that are sabotaged: models of the literature and first-principles cases.

A clean case carries everything a first-principles case has that its kind can carry; models state
their filling in case.toml and a Fermi energy in the middle of the gap in the .win file.
"""

from __future__ import annotations

import itertools
import shutil
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from case_writer import write_case
from lattice_models import (
    LatticeModel,
    atomic_insulator,
    bhz,
    fu_kane_mele,
    kane_mele,
    wilson_dirac,
)

REAL = Path(__file__).parents[2] / "fixtures" / "cases"
NOT_COPIED = ("reference.json", "dft_parity.json", "_tb.dat.gz")
"""Files that are no input of the package, or that would only be read in place of `_hr.dat`."""


@dataclass(frozen=True, slots=True)
class CleanCase:
    """A case with a known answer.

    Attributes
    ----------
    name
        Its seedname.
    z2, class_
        The right answer: (nu0; nu1 nu2 nu3), or (nu,) in 2D.
    filling
        Occupied bands.
    source
        Where the answer comes from.
    real
        From a first-principles run, with wsvec, centres, eig and band files.
    lay
        Writes the clean case into a folder that does not exist yet.
    """

    name: str
    z2: tuple[int, ...]
    class_: str
    filling: int
    source: str
    real: bool
    lay: Callable[[Path], None]

    @property
    def thorough(self) -> bool:
        """Gets every fault; the others get those in which the Hamiltonian itself matters."""
        return self.name in THOROUGH

    @property
    def large(self) -> bool:
        """Takes a second or more to vet."""
        return self.real and len(self.z2) == 4


def _model(
    model: LatticeModel, name: str, z2: tuple[int, ...], class_: str, source: str
) -> CleanCase:
    named = replace(model, name=name)

    def lay(folder: Path) -> None:
        write_case(named, folder)
        win = folder / f"{name}.win"
        fermi = f"fermi_energy = {_mid_gap_ev(named):.6f}\n"
        win.write_text(fermi + win.read_text())

    return CleanCase(name, z2, class_, named.filling, source, False, lay)


def _stretched(model: LatticeModel) -> LatticeModel:
    """The diamond lattice with its strong bond as short as it should be.

    A crystal that is drawn as cubic would promise rotations that the model does not have.
    """
    sites = np.array([[0.0, 0.0, 0.0], [0.24, 0.24, 0.24]])
    crystal = replace(model.crystal, positions_frac=sites)
    basis = replace(model.basis, positions_frac=np.repeat(sites, 2, axis=0))
    return replace(model, crystal=crystal, basis=basis, centre=(0.12, 0.12, 0.12))


def _mid_gap_ev(model: LatticeModel) -> float:
    axes = [[0.0, 0.25, 0.5] if periodic else [0.0] for periodic in model.crystal.periodic]
    energies = np.array(
        [np.linalg.eigvalsh(model.hamiltonian_at(k)) for k in itertools.product(*axes)]
    )
    top, bottom = energies[:, model.filling - 1].max(), energies[:, model.filling].min()
    return float(top + bottom) / 2


def _real(name: str, z2: tuple[int, ...], class_: str, filling: int, source: str) -> CleanCase:
    def lay(folder: Path) -> None:
        folder.mkdir(parents=True)
        for file in sorted((REAL / name).iterdir()):
            if not file.name.endswith(NOT_COPIED):
                shutil.copyfile(file, folder / file.name)

    return CleanCase(name, z2, class_, filling, source, True, lay)


FU_KANE = "Fu, Kane, PRB 76, 045302 (2007), doi:10.1103/PhysRevB.76.045302"
PARITIES = "parities of the plane-wave states, fixtures/cases/{}/dft_parity.json"

MODELS = (
    _model(wilson_dirac(m=-2.0), "dirac_strong", (1, 0, 0, 0), "strong-ti", FU_KANE),
    _model(wilson_dirac(m=0.0), "dirac_weak", (0, 1, 1, 1), "weak-ti", FU_KANE),
    _model(wilson_dirac(m=4.0), "dirac_trivial", (0, 0, 0, 0), "trivial", FU_KANE),
    _model(
        _stretched(fu_kane_mele(dt=(0.4, 0, 0, 0))),
        "diamond_strong",
        (1, 1, 1, 1),
        "strong-ti",
        "Fu, Kane, Mele, PRL 98, 106803 (2007), doi:10.1103/PhysRevLett.98.106803",
    ),
    _model(
        kane_mele(),
        "kane_mele",
        (1,),
        "strong-ti",
        "Kane, Mele, PRL 95, 146802 (2005), doi:10.1103/PhysRevLett.95.146802",
    ),
    _model(
        bhz(m=2.0),
        "bhz",
        (1,),
        "strong-ti",
        "Bernevig, Hughes, Zhang, Science 314, 1757 (2006), doi:10.1126/science.1133734",
    ),
    _model(atomic_insulator(), "atomic", (0, 0, 0, 0), "trivial", FU_KANE),
)

REALS = tuple(
    _real(name, z2, class_, filling, PARITIES.format(name))
    for name, z2, class_, filling in (
        ("Bi2Se3", (1, 0, 0, 0), "strong-ti", 18),
        ("Sb2Se3", (0, 0, 0, 0), "trivial", 18),
        ("PbTe_a656", (0, 0, 0, 0), "trivial", 6),
        ("Sb", (1, 1, 1, 1), "strong-ti", 10),
        ("Bi111_bilayer", (1,), "strong-ti", 6),
    )
)

THOROUGH = ("dirac_strong", "kane_mele", "Bi2Se3", "Bi111_bilayer")

CLEAN_CASES = {case.name: case for case in (*MODELS, *REALS)}
