"""Task functions that look for the cause where a verdict is in doubt."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from topovet.diagnosis.noise import noise_against_inversion, noise_against_time_reversal
from topovet.diagnosis.rereadings import (
    look_closer,
    reread_bare,
    reread_declaration,
    reread_fillings,
    reread_inferred,
    reread_shorter,
    reread_symmetrised,
)
from topovet.diagnosis.results import Experiments, NoiseTest, Rereading
from topovet.diagnosis.subject import Subject, typical_gap_ev
from topovet.errors import NoInversionError
from topovet.model.assemble import LatticeHamiltonian
from topovet.notation import k_text
from topovet.pipeline.runner import Context
from topovet.pipeline.steps_intake import BasedHamiltonian
from topovet.pipeline.task import NotApplicable, Task
from topovet.symmetry.inversion import build_inversion
from topovet.symmetry.results import InversionOperator
from topovet.verdict import criteria
from topovet.verdict.doubt import reason_for_doubt, worth_trying
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.flags_declaration import best_correction, holds_as_inferred, moved_centre
from topovet.verdict.raised import raise_flags


def experiment(
    *,
    context: Context,
    findings: Findings,
    hamiltonian_with_basis: BasedHamiltonian,
    bare: LatticeHamiltonian,
) -> Experiments:
    """The case read in other ways, where something is wrong with it as it is."""
    flags = raise_flags(findings)
    reason = reason_for_doubt(findings, flags)
    if not reason:
        raise NotApplicable("nothing is in doubt")
    subject = _subject(findings, hamiltonian_with_basis)
    rereadings = (
        *_other_declarations(subject, findings, hamiltonian_with_basis),
        *_other_hamiltonians(subject, findings, hamiltonian_with_basis, bare, flags),
    )
    noise = tuple(_noise(subject))
    return Experiments(reason, rereadings, noise, typical_gap_ev(subject))


def _subject(findings: Findings, based: BasedHamiltonian) -> Subject:
    assert findings.electrons is not None
    return Subject(
        lattice=based.lattice,
        crystal=findings.declared.crystal,
        filling=findings.electrons.filling,
        operator=_operator(findings, based),
        time_reversal=findings.time_reversal,
        inversion=findings.inversion,
    )


def _operator(findings: Findings, based: BasedHamiltonian) -> InversionOperator | None:
    """The inversion that parities were counted with."""
    inversion = findings.inversion
    if not inversion.present:
        return None
    if based.basis is None:
        return None if findings.inferred is None else findings.inferred.operator
    try:
        return build_inversion(based.basis, findings.declared.crystal, np.array(inversion.centre))
    except NoInversionError:
        return None


def _other_declarations(
    subject: Subject, findings: Findings, based: BasedHamiltonian
) -> Iterator[Rereading]:
    """Corrections of the declared orbitals, and other centres of inversion."""
    check = findings.declaration
    if check is None or based.basis is None:
        return
    correction, trial = best_correction(check), moved_centre(check)
    if correction is not None:
        change = f"declared orbitals read anew ({correction.reading.kind})"
        yield reread_declaration(subject, based.basis, correction, change)
    elif holds_as_inferred(check):
        change = "inversion inferred from the Hamiltonian in place of the declared one"
        found = reread_inferred(subject, check.inferred, "declaration", change)
        if found is not None:
            yield found
    if trial is not None:
        change = f"inversion about {k_text(trial.inferred.centre_frac.tolist())}"
        found = reread_inferred(subject, trial.inferred, "centre", change)
        if found is not None:
            yield found


def _other_hamiltonians(
    subject: Subject,
    findings: Findings,
    based: BasedHamiltonian,
    bare: LatticeHamiltonian,
    flags: Sequence[Flag],
) -> Iterator[Rereading]:
    """Other fillings, and H symmetrised, cut shorter, without shifts, or looked at more closely."""
    if worth_trying("filling", flags):
        assert findings.electrons is not None
        counted = findings.electrons.mean_count
        yield from reread_fillings(subject, () if counted is None else (round(counted),))
    group = findings.space_group
    if worth_trying("symmetrised", flags) and based.basis is not None and group is not None:
        average = reread_symmetrised(subject, based.basis, group, reversal=findings.spinful)
        if average is not None:
            yield average
    if worth_trying("shorter-range", flags):
        shorter = reread_shorter(subject)
        if shorter is not None:
            yield shorter
    if worth_trying("bare", flags) and bare.model.n_r != subject.lattice.model.n_r:
        yield reread_bare(subject, bare)
    if worth_trying("closer-look", flags):
        yield look_closer(subject)


def _noise(subject: Subject) -> Iterator[NoiseTest]:
    """Where the residual of each symmetry sits that is broken by more than its tolerance."""
    reversal, inversion = subject.time_reversal, subject.inversion
    model = subject.lattice.model
    if reversal.violation_mev > criteria.SYMMETRY_MEV and model.n_orb % 2 == 0:
        yield noise_against_time_reversal(model)
    violation = inversion.violation_mev or 0.0
    if subject.operator is not None and violation > criteria.SYMMETRY_MEV:
        yield noise_against_inversion(model, subject.operator)


TASKS = (
    Task(
        "experiments",
        "read the case in other ways where something is wrong",
        experiment,
        needs=("findings", "hamiltonian-with-basis", "bare"),
        version=3,
    ),
)
