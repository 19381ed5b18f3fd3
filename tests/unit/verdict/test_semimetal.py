"""When nodes give a class, and each single thing that forbids it. All cases invented."""

from __future__ import annotations

from dataclasses import replace

import pytest

from invented_nodes import INCOMPLETE, WEYL, findings_with, line, point, search
from topovet.invariants.nodes.results import NodeSearch, Reference
from topovet.verdict.conclude import conclude
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.grade import grade
from topovet.verdict.judge import judge
from topovet.verdict.raised import raise_flags
from topovet.verdict.semimetal import conclude_nodes

DIRAC = point(0, kind="dirac", multiplicity=4, protection="C4 eigenvalues change")


def closing(findings: Findings) -> Flag:
    (flag,) = [f for f in raise_flags(findings) if f.code == "gap-closes"]
    return flag


@pytest.mark.parametrize(
    ("nodes", "class_"),
    [
        (WEYL, "weyl-semimetal"),
        (search(DIRAC), "dirac-semimetal"),
        (search(lines=(line(),)), "nodal-line"),
        (search(point(1, from_reference_ev=0.9), point(-1, from_reference_ev=-0.8)), "metal"),
        (search(point(1), point(-1), replace(DIRAC, from_reference_ev=0.001)), "dirac-semimetal"),
    ],
)
def test_nodes_that_are_held_give_the_class(nodes: NodeSearch, class_: str) -> None:
    findings = findings_with(nodes)
    flag = closing(findings)
    assert flag.severity == "warning"
    assert flag.evidence["chirality_sum"] == 0
    verdict = judge(findings, inputs=[], settings={}, task_seconds={})
    assert verdict.class_ == class_
    assert verdict.invariants.z2 is None
    assert verdict.confidence.grade == "B"
    assert verdict.robustness.radius_meV == pytest.approx(100.0)
    assert not any(f.severity == "error" for f in verdict.flags)


def test_another_kind_nearer_to_the_fermi_level_names_the_class() -> None:
    near = search(point(1, from_reference_ev=0.2), point(-1), lines=(line(),))
    assert conclude_nodes(findings_with(near)).class_ == "nodal-line"


OBJECTIONS = {
    "incomplete": (INCOMPLETE, "may be incomplete"),
    "nothing found": (search(), "no closing"),
    "accident": (search(point(0, kind="accidental", multiplicity=4)), "transition"),
    "no charge": (search(point(None, kind="uncharacterised")), "of no class"),
    "line that nothing holds": (search(lines=(line(protection=""),)), "holds a nodal line"),
    "merging": (search(point(1, surface_gap_ev=5e-4), point(-1)), "known errors"),
    "too many": (search(*[point((-1) ** i) for i in range(60)]), "too many"),
    "filling": (
        replace(WEYL, reference=Reference(5.4, "filling", 12, 0.3)),
        "with 12 filled bands in place of 10 it would be an insulator",
    ),
    "degenerate": (
        search(complete=False, reason="degenerate throughout", degenerate=True),
        "degenerate throughout",
    ),
    "one bad among good": (search(*WEYL.points, point(0, kind="accidental")), "transition"),
}


@pytest.mark.parametrize("name", OBJECTIONS)
def test_each_objection_leaves_the_class_open(name: str) -> None:
    nodes, said = OBJECTIONS[name]
    findings = findings_with(nodes)
    flag = closing(findings)
    assert flag.severity == "error"
    assert said in flag.summary
    verdict = judge(findings, inputs=[], settings={}, task_seconds={})
    assert (verdict.class_, verdict.confidence.grade) == ("undetermined", "D")


def test_a_fermi_energy_of_the_input_settles_the_filling() -> None:
    given = replace(WEYL, reference=Reference(5.4, "given", 12, 0.3))
    assert conclude_nodes(findings_with(given)).class_ == "weyl-semimetal"


def test_without_a_search_it_is_as_before() -> None:
    findings = findings_with(None)
    assert closing(findings).severity == "error"
    assert conclude(findings, raise_flags(findings)).class_ == "undetermined"


def test_other_errors_leave_the_class_open() -> None:
    """A wrong filling puts the gap inside a group of bands, where nodes abound."""
    findings = findings_with(WEYL)
    flags = (*raise_flags(findings), Flag("filling-off", "error", "odd filling."))
    conclusion = conclude(findings, flags)
    assert conclusion.class_ == "undetermined"
    assert grade(findings, conclusion, flags).grade == "D"


def test_broken_time_reversal_without_any_operation_is_an_objection() -> None:
    """Noise breaks everything, and makes Weyl points."""
    findings = findings_with(WEYL)
    broken = replace(findings, time_reversal=replace(findings.time_reversal, present=False))
    assert "time reversal is broken" in conclude_nodes(broken).grounds[0]
