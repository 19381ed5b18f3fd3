"""Indices of the occupied bands at one lambda, by parities and by Wilson loops or Chern numbers."""

from __future__ import annotations

from topovet.deformation.path import Path
from topovet.deformation.results import SideIndices
from topovet.invariants.chern import compute_chern
from topovet.invariants.parity import compute_parity
from topovet.invariants.results import ChernWitness, ParityWitness, WilsonWitness
from topovet.invariants.wilson_sheet import CRITERIA
from topovet.invariants.wilson_witness import compute_wilson
from topovet.symmetry.results import InversionOperator

Periodic = tuple[bool, bool, bool]


def compute_indices(
    path: Path,
    lam: float,
    filling: int,
    periodic: Periodic,
    *,
    time_reversal: bool,
    inversion: InversionOperator | None,
    effort: str,
) -> SideIndices:
    """Every witness that applies at lambda.

    Parameters
    ----------
    path, lam, filling, periodic
        The Hamiltonian.
    time_reversal
        Whether it has time reversal: then Wilson loops are followed (with spin), else Chern numbers
        are counted.
    inversion
        Its inversion; None without.
    effort
        "quick", "standard" or "thorough".
    """
    bloch, spinful = path.bloch_at(lam), path.a.spinful
    kramers = time_reversal and spinful
    parity: ParityWitness | None = None
    wilson: WilsonWitness | None = None
    chern: ChernWitness | None = None
    if inversion is not None:
        parity = compute_parity(bloch, inversion, filling, periodic, kramers=kramers)
    if kramers:
        wilson = compute_wilson(
            bloch,
            filling,
            periodic,
            time_reversal=True,
            spinful=True,
            criteria=CRITERIA[effort],
        )
    elif not time_reversal:
        chern = compute_chern(bloch, filling, periodic, CRITERIA[effort])
    return _side(lam, parity, wilson, chern)


def _side(
    lam: float,
    parity: ParityWitness | None,
    wilson: WilsonWitness | None,
    chern: ChernWitness | None,
) -> SideIndices:
    witnesses = {"parity": parity, "Wilson loops": wilson, "Chern numbers": chern}
    notes = [
        f"{name}: {witness.reason}"
        for name, witness in witnesses.items()
        if witness is not None and witness.status != "ok"
    ]
    parity_z2 = parity.z2 if parity is not None and parity.status == "ok" else None
    wilson_z2 = wilson.z2 if wilson is not None and wilson.status == "ok" else None
    numbers = chern.chern if chern is not None and chern.status == "ok" else None
    read = parity is not None and parity.status == "ok"
    eta4 = parity.eta4 if read and parity is not None else None
    said = [z2 for z2 in (parity_z2, wilson_z2) if z2 is not None]
    agreement = "none"
    if len(said) == 2:
        agreement = "agree" if said[0] == said[1] else "disagree"
    elif said or numbers is not None or eta4 is not None:
        agreement = "one-witness"
    return SideIndices(
        lam=lam,
        parity_z2=parity_z2,
        z4=parity.z4 if read and parity is not None else None,
        eta4=eta4,
        wilson_z2=wilson_z2,
        chern=numbers,
        notes=tuple(notes),
        agreement=agreement,
    )
