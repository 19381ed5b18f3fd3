"""From the file's H(R) to the model: weights and shifts applied, 2D folded, spin order made one."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.intake.records import HamiltonianFile, WsShifts
from topovet.intake.shifts.ws_shifts import apply_shifts
from topovet.model.completion import complete
from topovet.model.fourier import BlochSum, build_bloch_sum
from topovet.model.hamiltonian import TightBindingModel, build_model


@dataclass(frozen=True, slots=True, eq=False)
class LatticeHamiltonian:
    """The same Hamiltonian in real space and as a Fourier sum."""

    model: TightBindingModel
    bloch: BlochSum


def assemble(
    hamiltonian: HamiltonianFile,
    shifts: WsShifts | None,
    periodic: tuple[bool, bool, bool],
    *,
    spinful: bool,
) -> LatticeHamiltonian:
    """H(R) with degeneracies and shifts applied.

    Along a non-periodic direction all R are folded onto 0: only k = 0 is asked for there.

    Parameters
    ----------
    hamiltonian, shifts
        The file and the chosen shifts; None reads the bare R vectors.
    periodic
        Periodic directions of the crystal.
    spinful
        Whether the Wannier functions are spinor components.
    """
    r_cells, h_r = apply_shifts(*complete(hamiltonian, shifts))
    r_cells = np.where(np.array(periodic), r_cells, 0)
    model = build_model(r_cells, h_r, spinful=spinful, consume=True)
    return LatticeHamiltonian(model, build_bloch_sum(model))
