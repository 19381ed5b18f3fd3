"""The intake audit alone: what was read, what is wrong, and the symmetry residuals."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from topovet.notation import mev
from topovet.pipeline.dossier import start_run
from topovet.pipeline.inputs import CaseInput
from topovet.pipeline.runner import Observer
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.flags_intake import intake_flags
from topovet.verdict.flags_symmetry import symmetry_flags


@dataclass(frozen=True, slots=True, eq=False)
class Inspection:
    """What an audit finds.

    Attributes
    ----------
    inputs
        Files that were read.
    findings
        Results of the intake and symmetry steps.
    flags
        Those that need no electron count.
    """

    inputs: tuple[CaseInput, ...]
    findings: Findings
    flags: tuple[Flag, ...]

    def as_dict(self) -> dict[str, Any]:
        """The audit as plain data; energies in meV, lengths in angstrom, as the names say."""
        findings = self.findings
        group = findings.space_group
        return {
            "name": findings.declared.name,
            "formula": findings.declared.crystal.formula,
            "dimension": findings.declared.crystal.dimension,
            "spinful": findings.spinful,
            "space_group": None if group is None else [group.number, group.symbol],
            "inputs": [asdict(entry) for entry in self.inputs],
            "audit": asdict(findings.audit),
            "time_reversal": asdict(findings.time_reversal),
            "inversion": asdict(findings.inversion),
            "flags": [asdict(flag) for flag in self.flags],
        }


def inspect_case(case: str | Path, *, observe: Observer = lambda event, text: None) -> Inspection:
    """Audit a case; nothing is written.

    Raises
    ------
    TopovetError
        The case cannot be read.
    """
    run = start_run(case, observe=observe)
    declared = run.result("declarations")
    findings = Findings(
        declared=declared,
        spinful=bool(declared.spinful),
        audit=run.result("audit"),
        decay=run.result("decay"),
        spin_order=run.result("spin-order"),
        shift_test=run.result("shift-test"),
        space_group=run.result("space-group"),
        inferred=run.result("inferred-inversion"),
        symmetry_class=run.result("symmetry-class"),
        time_reversal=run.result("time-reversal"),
        inversion=run.result("inversion"),
    )
    flags = (*intake_flags(findings), *symmetry_flags(findings))
    return Inspection(run.inputs, findings, flags)


def inspection_lines(inspection: Inspection) -> Iterator[str]:
    """The audit for a terminal."""
    findings = inspection.findings
    declared, audit, group = findings.declared, findings.audit, findings.space_group
    yield f"{declared.name}  {declared.crystal.formula}, {declared.crystal.dimension}D"
    yield from _rows("files", ((i.file, f"{i.bytes} bytes") for i in inspection.inputs))
    yield from _rows("Hamiltonian", _hamiltonian_rows(findings))
    yield from _rows("symmetry", _symmetry_rows(findings))
    note = declared.undeclared_reason
    declared_text = f"{len(declared.orbitals)} orbitals" if declared.orbitals else f"none ({note})"
    yield from _rows(
        "structure",
        (
            ("space group", "unknown" if group is None else f"{group.symbol} ({group.number})"),
            ("declared", declared_text),
            ("shifts", f"{audit.shift_source}: {audit.shift_note}"),
        ),
    )
    yield "flags"
    for flag in inspection.flags:
        yield f"  {flag.severity}: {flag.code}: {flag.summary}"
    if not inspection.flags:
        yield "  none"


def _hamiltonian_rows(findings: Findings) -> Iterator[tuple[str, str]]:
    audit = findings.audit
    kind = "spinor" if findings.spinful else "spinless"
    yield "size", f"{audit.n_wann} {kind} Wannier functions, {audit.n_r} R vectors"
    yield "read by", audit.reader
    yield "Hermiticity", f"{mev(audit.hermiticity_mev)}"
    points = "unknown mesh" if audit.mesh_points is None else f"{audit.mesh_points} mesh points"
    yield "degeneracies", f"add up to {audit.degeneracy_sum:.6g} ({points})"
    decay = findings.decay
    yield "largest hopping", f"{decay.largest_hopping_mev:.4g} meV"
    if decay.rim_mev is not None:
        yield "on the rim", f"{mev(decay.rim_mev)} beyond {decay.rim_ang:.1f} angstrom"
    yield "rounding", f"{mev(audit.rounding_mev)} in H(k)"


def _symmetry_rows(findings: Findings) -> Iterator[tuple[str, str]]:
    test, inversion = findings.time_reversal, findings.inversion
    word = "holds" if test.present else "broken"
    yield "time reversal", f"{word}, {mev(test.violation_mev)}"
    yield "spin order", findings.spin_order.found
    if test.kramers_splitting_mev is not None:
        yield "Kramers pairs", f"split by {mev(test.kramers_splitting_mev)} at most"
    if inversion.present:
        centre = ", ".join(f"{c:g}" for c in inversion.centre or ())
        yield (
            "inversion",
            f"about ({centre}): {mev(inversion.violation_mev)}, "
            f"{mev(inversion.violation_trim_mev)} at the TRIM",
        )
    else:
        yield "inversion", inversion.reason


def _rows(title: str, rows: Iterable[tuple[str, str]]) -> Iterator[str]:
    yield title
    for name, text in rows:
        yield f"  {name:<16}{text}"
