"""The certificate of a proved gap, checked again against the files of its case."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from topovet.errors import UndefinedError
from topovet.notation import ev, mev
from topovet.pipeline.dossier import start_run
from topovet.pipeline.runner import Observer
from topovet.spectrum.proof.recheck import Recheck, recheck
from topovet.spectrum.proof.results import ProvedGap


class CertificateError(UndefinedError):
    """A certificate does not prove what it says."""


def recheck_gap(
    case: str | Path,
    *,
    out: Path,
    settings: Mapping[str, Any] | None = None,
    observe: Observer = lambda event, text: None,
) -> str:
    """Read the Hamiltonian again, and the certificate from the dossier; check one by the other.

    Parameters
    ----------
    case, settings
        As given to `vet_case`.
    out
        The dossier.

    Returns
    -------
    str
        One sentence on what was checked.

    Raises
    ------
    UndefinedError
        The dossier holds no proof of a gap.
    CertificateError
        The certificate does not hold.
    """
    run = start_run(case, out=out, settings=settings, observe=observe)
    proved: ProvedGap | None = run.result("gap-proof")
    if proved is None:
        reason = run.states["gap-proof"].reason or "it was not computed"
        raise UndefinedError(f"there is no proved gap to check again: {reason}")
    made = recheck(run.result("hamiltonian-with-basis").lattice.model, proved.certificate)
    if not made.holds:
        raise CertificateError(
            f"the certificate of the gap does not hold: {'; '.join(made.problems)}; delete "
            f"{out / 'tasks'} and vet the case again"
        )
    return _sentence(made)


def _sentence(made: Recheck) -> str:
    covered = f"{made.n_boxes} boxes cover the zone"
    if made.n_open:
        return (
            f"certificate checked again: {covered} but for {made.n_open} that were left open; in "
            f"the others the direct gap exceeds {ev(made.lowest_ev - made.cost_ev)}."
        )
    return (
        f"certificate checked again: {covered}, and in each the direct gap exceeds "
        f"{ev(made.lowest_ev - made.cost_ev)}, {mev(1000 * made.cost_ev)} of symmetry residuals "
        "taken off."
    )
