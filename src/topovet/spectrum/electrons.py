"""The electron count: from whoever states it, in a fixed order of trust, never guessed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from topovet.arrays import FloatArray
from topovet.errors import UndefinedError
from topovet.spectrum.results import Electrons

WHOLE_NUMBER_TOLERANCE = 0.2
"""How far the mean count below a Fermi energy may be from a whole (with spin and time reversal:
even) number of electrons. A compensated semimetal counts to a whole number; a doped sample or a
shifted Fermi energy does not."""


class FillingError(UndefinedError):
    """The filling is missing, impossible, or cannot be had from the Fermi energy."""


@dataclass(frozen=True, slots=True)
class Statement:
    """One statement of the electron count: where it stands, filling or Fermi energy (eV)."""

    source: str
    filling: int | None
    fermi_ev: float | None


def choose_statement(statements: tuple[Statement, ...]) -> Statement:
    """The first statement that says anything.

    Raises
    ------
    FillingError
        None of them does.
    """
    for statement in statements:
        if statement.filling is not None or statement.fermi_ev is not None:
            return statement
    raise FillingError(
        "the electron count is not stated: no --filling or --fermi on the command line, no filling "
        "or fermi_eV in case.toml, no fermi_energy in the .win file; state one of them."
    )


def count_electrons(
    statement: Statement,
    fermi_ev: float | None,
    mesh_energies: FloatArray,
    *,
    kramers: bool,
) -> Electrons:
    """Filling from a statement; a Fermi energy is turned into one by counting.

    Parameters
    ----------
    statement
        What is trusted.
    fermi_ev
        Any Fermi energy known, for the cross-check; the statement's own if it has one.
    mesh_energies
        (..., n_orb) eV on a k-mesh.
    kramers
        Whether bands come in Kramers pairs, so that an insulator has an even filling.

    Raises
    ------
    FillingError
        The filling is not between 1 and n_orb - 1, or the Fermi energy counts to no whole number.
    """
    n_orb = mesh_energies.shape[-1]
    fermi_ev = statement.fermi_ev if statement.fermi_ev is not None else fermi_ev
    mean, least, most = _count(mesh_energies, fermi_ev)
    if statement.filling is not None:
        filling = statement.filling
        how = f"{filling} occupied bands, stated in {statement.source}"
    else:
        assert fermi_ev is not None
        assert mean is not None
        filling = _filling_from_fermi(mean, fermi_ev, statement.source, kramers, least == most)
        how = f"{filling} bands lie below E_F = {fermi_ev:g} eV ({statement.source}) " + (
            "at every point of the mesh"
            if least == most
            else f"on average ({mean:.3f}); between {least} and {most} from point to point"
        )
    if not 0 < filling < n_orb:
        raise FillingError(
            f"filling {filling} ({statement.source}) leaves no gap to look at: the Hamiltonian has "
            f"{n_orb} bands, so the filling must be from 1 to {n_orb - 1}; check the count of "
            "electrons in the Wannier manifold (excluded bands do not count)."
        )
    return Electrons(filling, statement.source, how, fermi_ev, mean, least, most)


def _count(
    mesh_energies: FloatArray, fermi_ev: float | None
) -> tuple[float | None, int | None, int | None]:
    if fermi_ev is None:
        return None, None, None
    counts = (mesh_energies < fermi_ev).sum(axis=-1)
    return float(counts.mean()), int(counts.min()), int(counts.max())


def _filling_from_fermi(
    mean: float, fermi_ev: float, source: str, kramers: bool, gapped: bool
) -> int:
    step = 2 if kramers else 1
    filling = step * int(np.round(mean / step))
    if gapped or abs(mean - filling) <= WHOLE_NUMBER_TOLERANCE:
        return filling
    raise FillingError(
        f"the Fermi energy {fermi_ev:g} eV ({source}) cuts through bands and counts to {mean:.2f} "
        f"electrons per cell, which is no {'even' if kramers else 'whole'} number; state the "
        "filling itself (--filling, or filling in case.toml)."
    )
