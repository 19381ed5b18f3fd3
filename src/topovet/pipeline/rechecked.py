"""The certificates of proved gaps, checked again against the files of their case."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from topovet.errors import UndefinedError
from topovet.notation import ev, mev
from topovet.pipeline.dossier import start_run
from topovet.pipeline.runner import Observer
from topovet.spectrum.proof.recheck import Recheck, recheck
from topovet.spectrum.proof.results import Certificate, ProvedGap, ProvedIndirectGap


class CertificateError(UndefinedError):
    """A certificate does not prove what it says."""


def recheck_gap(
    case: str | Path,
    *,
    out: Path,
    settings: Mapping[str, Any] | None = None,
    observe: Observer = lambda event, text: None,
) -> str:
    """Read the Hamiltonian again, and the certificates from the dossier; check each by the other.

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
    indirect: ProvedIndirectGap | None = run.result("indirect-gap-proof")
    model = run.result("hamiltonian-with-basis").lattice.model

    def checked(certificate: Certificate, name: str) -> Recheck:
        made = recheck(model, certificate)
        if not made.holds:
            raise CertificateError(
                f"the certificate of the {name} does not hold: {'; '.join(made.problems)}; delete "
                f"{out / 'tasks'} and vet the case again"
            )
        return made

    sentence = _sentence(checked(proved.certificate, "gap"))
    if indirect is None:
        return sentence
    valence = checked(indirect.valence, "valence edge")
    conduction = checked(indirect.conduction, "conduction edge")
    return f"{sentence} {_edges_sentence(valence, conduction)}"


def _edges_sentence(valence: Recheck, conduction: Recheck) -> str:
    bound = sum(m.lowest_ev - m.cost_ev for m in (valence, conduction))
    n_open = valence.n_open + conduction.n_open
    where = f" outside the {n_open} that were left open" if n_open else ""
    return (
        f"{valence.n_boxes + conduction.n_boxes} boxes bound the band edges; the indirect gap "
        f"exceeds {ev(bound)}{where}."
    )


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
