"""Walks H from one case to another: both are vetted, compared, mixed; result, figure and page."""

from __future__ import annotations

import importlib.metadata
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

import topovet
from topovet.deformation.comparison import EndMember, NotComparableError, compare_ends, with_spin
from topovet.deformation.conclusion import Conclusion, conclude
from topovet.deformation.results import Walk
from topovet.deformation.walk import walk
from topovet.errors import NoInversionError
from topovet.model.basis import OrbitalBasis
from topovet.pipeline.dossier import start_run, vet_case
from topovet.pipeline.inputs import check_unchanged
from topovet.pipeline.runner import Observer, Run
from topovet.pipeline.store import write_atomically
from topovet.report.deformation.document import deformation_json
from topovet.report.deformation.html import render_deformation
from topovet.report.deformation.material import DeformationMaterial, EndEntry
from topovet.report.figures.deformation import deformation_figure
from topovet.spectrum.eigen import one_blas_thread
from topovet.symmetry.group_results import GroupTest, OperationTest
from topovet.symmetry.inversion import build_inversion
from topovet.symmetry.operator_set import build_operators
from topovet.symmetry.operators import WannierOperator
from topovet.symmetry.results import InversionOperator
from topovet.verdict.document import Verdict

ABOUT_THE_INPUT = (
    *("not-hermitian", "duplicate-r", "missing-partner-r", "range-truncated", "centres-off"),
    *("cell-mismatch", "orbital-declaration-wrong", "spin-order-mismatch", "symmetry-broken"),
    *("inversion-centre-shifted", "filling-off", "interpolation-poor"),
)
"""Flags that, at severity error, say that an end is not what it is taken for: it is refused. Errors
about gap and witnesses are no defect of the Hamiltonian; they are reported, and indices stay open.
"""

SAME_TRANSLATION = 0.05
PACKAGES = ("numpy", "scipy", "spglib")


@dataclass(frozen=True, slots=True)
class Deformation:
    """A finished walk.

    Attributes
    ----------
    folder
        Where it was written.
    material
        All that the page shows.
    json
        The document, as text.
    """

    folder: Path
    material: DeformationMaterial
    json: str

    @property
    def walk(self) -> Walk:
        return self.material.walk

    @property
    def conclusion(self) -> Conclusion:
        return self.material.conclusion


def deform_cases(
    case_a: str | Path,
    case_b: str | Path,
    *,
    out: Path,
    filling: int | None = None,
    effort: str = "standard",
    average: bool = True,
    observe: Observer = lambda event, text: None,
) -> Deformation:
    """Vet two cases, walk from one to the other, write `deform.json`, `deform.html` and the figure.

    Parameters
    ----------
    case_a, case_b
        Case folders, or their Hamiltonian files.
    out
        Folder; the dossiers of the two cases go to its `A` and `B`, and are gone on with.
    filling
        Occupied bands of both, spin counted; else what each case says.
    effort
        "quick", "standard" or "thorough".
    average
        Average both ends over all operations that the occupied bands of both have; else over
        inversion and time reversal alone.

    Raises
    ------
    NotComparableError
        The two are not written in the same functions, or one of them carries an error that makes
        its Hamiltonian another than the declared one.
    TopovetError
        A case cannot be vetted, or the folder cannot be written.
    """
    settings = {"filling": filling, "effort": effort}
    cases = (("A", case_a), ("B", case_b))
    # whether the two can be mixed is known long before they are vetted
    compare_ends(
        *_ends([start_run(case, out=out / name, settings=settings) for name, case in cases])
    )
    verdicts = [
        vet_case(case, out=out / name, settings=settings, observe=_told(name, observe)).verdict
        for name, case in cases
    ]
    for verdict in verdicts:
        check_sound(verdict)
    runs = [start_run(case, out=out / name, settings=settings) for name, case in cases]
    ends = _ends(runs)
    operators = _shared_operators(runs, ends) if average else ()
    with one_blas_thread():
        made = walk(
            ends[0],
            ends[1],
            operators=operators,
            effort=effort,
            observe=lambda text: observe("start", text),
        )
    for run in runs:
        check_unchanged(run.files, run.inputs)
    return _write(out, made, runs, verdicts, {**settings, "average": average})


def _told(name: str, observe: Observer) -> Observer:
    return lambda event, text: observe(event, f"{name}: {text}")


def check_sound(verdict: Verdict) -> None:
    """Raise `NotComparableError` where an end is not the Hamiltonian that it is taken for."""
    bad = [f for f in verdict.flags if f.severity == "error" and f.code in ABOUT_THE_INPUT]
    if bad:
        raise NotComparableError(
            f"{verdict.case.name} carries the flag {bad[0].code} of severity error "
            f"({bad[0].summary.rstrip('.')}): a walk from or to it would mean nothing; mend the "
            "case, then deform again."
        )


def _ends(runs: list[Run]) -> tuple[EndMember, EndMember]:
    with one_blas_thread():
        a, b = (end_of_run(run) for run in runs)
    if a.name == b.name:
        a, b = replace(a, name=f"{a.name} (A)"), replace(b, name=f"{b.name} (B)")
    return a, b


def end_of_run(run: Run) -> EndMember:
    """One end of a walk from the results of a run; asks for no more of it than it needs."""
    based = run.result("hamiltonian-with-basis")
    declared, test = run.result("declarations"), run.result("inversion")
    inversion: InversionOperator | None = None
    if test.present and based.basis is not None:
        try:
            inversion = build_inversion(based.basis, declared.crystal, np.array(test.centre))
        except NoInversionError:
            inversion = None
    return EndMember(
        name=declared.name,
        crystal=declared.crystal,
        basis=based.basis,
        model=based.lattice.model,
        filling=run.result("electrons").filling,
        time_reversal=run.result("time-reversal").present,
        inversion=inversion,
    )


def _shared_operators(
    runs: list[Run], ends: tuple[EndMember, EndMember]
) -> tuple[WannierOperator, ...]:
    """Unitary operations that the occupied bands of both have, acting alike on both; else none."""
    groups: list[GroupTest | None] = [run.result("group") for run in runs]
    if groups[0] is None or groups[1] is None:
        return ()
    a, b = ends
    if a.model.spinful != b.model.spinful:
        a, b = (end if end.model.spinful else with_spin(end) for end in ends)
    if a.basis is None or b.basis is None or a.basis.n_orb != b.basis.n_orb:
        return ()
    shared = [t for t in _kept(groups[0]) if any(_same(t, u) for u in _kept(groups[1]))]
    built = [_operators(shared, end, basis) for end, basis in ((a, a.basis), (b, b.basis))]
    if len(built[0]) != len(shared) or len(built[1]) != len(shared):
        return ()
    alike = all(_act_alike(g, h) for g, h in zip(*built, strict=True))
    return built[0] if alike else ()


def _kept(group: GroupTest) -> list[OperationTest]:
    found = group.own if group.in_bands is None else group.in_bands
    tests = [group.tests[i] for i in found.members if i < group.n_structure]
    return [test for test in tests if not test.antiunitary]


def _same(one: OperationTest, two: OperationTest) -> bool:
    away = one.translation - two.translation
    near = np.abs(away - np.round(away)).max() < SAME_TRANSLATION
    return bool(near and np.array_equal(one.rotation, two.rotation))


def _operators(
    tests: list[OperationTest], end: EndMember, basis: OrbitalBasis
) -> tuple[WannierOperator, ...]:
    if not tests:
        return ()
    rotations = np.array([test.rotation for test in tests])
    translations = np.array([test.translation for test in tests])
    return build_operators(basis, end.crystal, rotations, translations).operators


def _act_alike(one: WannierOperator, two: WannierOperator) -> bool:
    return (
        np.array_equal(one.shifts, two.shifts)
        and np.array_equal(one.homes, two.homes)
        and bool(np.allclose(one.matrix, two.matrix, atol=1e-6))
    )


def _write(
    out: Path,
    made: Walk,
    runs: list[Run],
    verdicts: list[Verdict],
    settings: Mapping[str, Any],
) -> Deformation:
    material = DeformationMaterial(
        walk=made,
        conclusion=conclude(made, _doubts(made, verdicts)),
        a=_entry(runs[0], verdicts[0]),
        b=_entry(runs[1], verdicts[1]),
        settings=settings,
        version=topovet.__version__,
        packages={name: importlib.metadata.version(name) for name in PACKAGES},
    )
    text = deformation_json(material)
    figure = deformation_figure(material)
    page = render_deformation(material, figure)
    write_atomically(out / "figures" / "deform.svg", figure.encode())
    write_atomically(out / "deform.html", page.encode())
    # the document comes last: where it stands, the rest is whole
    write_atomically(out / "deform.json", text.encode())
    return Deformation(out, material, text)


def _entry(run: Run, verdict: Verdict) -> EndEntry:
    return EndEntry(
        name=verdict.case.name,
        formula=verdict.case.formula,
        class_=verdict.class_,
        z2=verdict.invariants.z2,
        grade=verdict.confidence.grade,
        errors=tuple(sorted({f.code for f in verdict.flags if f.severity == "error"})),
        files=tuple((i.file, i.sha256, i.bytes) for i in run.inputs),
    )


def _doubts(made: Walk, verdicts: list[Verdict]) -> tuple[str, ...]:
    """Flags of severity error at an end, and verdicts that say otherwise than the walk."""
    found = []
    for verdict, lam in zip(verdicts, (0.0, 1.0), strict=True):
        codes = sorted({f.code for f in verdict.flags if f.severity == "error"})
        if codes:
            found.append(f"{verdict.case.name} carries {', '.join(codes)} of severity error")
        sides = [s for segment in made.segments for s in segment.sides if s.lam == lam]
        stated = verdict.invariants.z2
        if sides and sides[0].z2 is not None and stated is not None and sides[0].z2 != stated:
            found.append(
                f"the verdict on {verdict.case.name} has other indices than the end of the walk: "
                "averaging over the symmetries changed them"
            )
    return tuple(found)
