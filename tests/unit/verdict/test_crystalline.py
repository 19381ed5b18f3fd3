"""What mirror Chern numbers and indicators make of a case whose Z2 indices are 0. All invented."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from invented_findings import SOUND, changed
from topovet.invariants.mirror_indicators import MirrorIndicator
from topovet.invariants.mirror_witness import MirrorPlane, MirrorWitness
from topovet.invariants.results import MirrorChern
from topovet.invariants.rotation_indicators import S4Indicator
from topovet.model.plane import coordinate_plane
from topovet.verdict.conclude import conclude, weigh_witnesses
from topovet.verdict.crystalline import indicator_values
from topovet.verdict.findings import Findings
from topovet.verdict.judge import judge
from topovet.verdict.raised import raise_flags

ZERO = (0, 0, 0, 0)


def plane(name: str, number: int | None, *, half: bool = False, reason: str = "") -> MirrorPlane:
    """A mirror normal to the third axis."""
    return MirrorPlane(
        name=name,
        normal_cart=(0.0, 0.0, 1.0),
        through=(0.0, 0.0, 0.0),
        row=(0, 0, 1),
        half=half,
        judged_mev=0.01,
        status="unresolved" if reason else "ok",
        reason=reason,
        number=number,
        taken_from="",
        evidence=None,
    )


def mirrors(*planes: MirrorPlane, left_out: tuple[str, ...] = ()) -> MirrorWitness:
    reason = "; ".join(p.reason for p in planes if p.reason)
    return MirrorWitness("unresolved" if reason else "ok", reason, planes, left_out, 900)


def two(at_0: int, at_half: int) -> MirrorWitness:
    return mirrors(plane("m(0 0 1) k=0", at_0), plane("m(0 0 1) k=G/2", at_half, half=True))


def trivial(z4: int = 0, **parts: Any) -> Findings:
    return changed(parity={"z2": ZERO, "z4": z4}, **parts)


def s4(z8: int | None) -> S4Indicator:
    return S4Indicator("ok", "", 0, 0, z8, "", 1.0, 0.5, ())


def indicator(n: int, value: int | None, *, half: bool = False) -> MirrorIndicator:
    where = replace(
        coordinate_plane(2, 0.5 if half else 0.0), name=f"mirror k={'1/2' if half else '0'}"
    )
    status = "failed" if value is None else "ok"
    return MirrorIndicator(where, (0.0, 0.0, 1.0), n, status, "", value, 1.0, 0.5)


@pytest.mark.parametrize(
    ("findings", "class_", "word"),
    [
        (trivial(mirror=two(0, 0)), "trivial", "mirror Chern numbers of 2 planes are 0"),
        (trivial(mirror=two(-2, 0)), "crystalline-ti", "m(0 0 1) k=0: −2"),
        (trivial(z4=2, mirror=two(2, 0)), "crystalline-ti", "hinge states besides"),
        (trivial(z4=2, mirror=two(0, 0)), "higher-order", "protected by a rotation, glide"),
        (trivial(z4=2), "higher-order", "protected by a mirror, rotation, glide"),
        (trivial(s4=s4(4), mirror=two(0, 0)), "higher-order", "z8 = 4"),
        (trivial(s4=s4(4), mirror=two(2, 0)), "crystalline-ti", "k=0: 2"),
        (trivial(mirror_indicators=(indicator(4, 2),)), "crystalline-ti", "z4m k=0 = 2"),
        (trivial(mirror_indicators=(indicator(4, 0),)), "trivial", "no mirror Chern number"),
        (
            trivial(mirror=mirrors(plane("m(0 0 1) k=0", None, reason="the budget ended"))),
            "trivial",
            "without an answer: the budget ended",
        ),
        (
            trivial(mirror=mirrors(plane("m(0 0 1) k=0", 0), left_out=("glides: m(1 0 0)",))),
            "trivial",
            "glides: m(1 0 0)",
        ),
        (
            replace(trivial(), missing={"mirror-chern": "the group has no mirror"}),
            "trivial",
            "the group has no mirror",
        ),
    ],
)
def test_class_and_grounds(findings: Findings, class_: str, word: str) -> None:
    conclusion = conclude(findings, raise_flags(findings))
    assert conclusion.class_ == class_
    assert word in "; ".join(conclusion.grounds)
    assert ("were not tested" in "; ".join(conclusion.grounds)) == (class_ != "crystalline-ti")


def test_numbers_are_asserted_with_the_indices() -> None:
    verdict = judge(trivial(mirror=two(-2, 0)), inputs=(), settings={}, task_seconds={})
    assert verdict.invariants.mirror_chern == {"m(0 0 1) k=0": -2, "m(0 0 1) k=G/2": 0}
    assert [p["mirror_chern"] for p in verdict.witnesses.mirror.planes] == [-2, 0]


def test_sum_rule_is_a_voice_of_its_own() -> None:
    """n_M modulo 2 at 0 and at 1/2: nu3, and nu0 as their sum."""
    findings = changed(parity=None, mirror=two(1, 0))
    agreement = weigh_witnesses(findings)
    assert (agreement.word, agreement.z2) == ("one-witness", None)  # nu1 and nu2 stay open
    assert SOUND.parity is not None
    assert SOUND.parity.z2 == (1, 0, 0, 0)
    assert weigh_witnesses(changed(mirror=two(1, 0))).word == "agree"


@pytest.mark.parametrize("numbers", [(0, 0), (1, 1), (0, 1), (2, 0)])
def test_numbers_that_contradict_z2_leave_nothing_asserted(numbers: tuple[int, int]) -> None:
    verdict = judge(changed(mirror=two(*numbers)), inputs=(), settings={}, task_seconds={})
    assert {flag.code for flag in verdict.flags} == {"witnesses-disagree"}
    assert verdict.agreement == "disagree"
    assert verdict.class_ == "undetermined"
    assert verdict.invariants.mirror_chern == {}


def test_a_sum_of_indices_can_contradict_without_any_single_one() -> None:
    """A plane k1 + k2 = 0 fixes nu0 + nu1 + nu2 alone."""
    diagonal = replace(plane("m(1 1 0) k=0", 0), row=(1, 1, 0))
    findings = changed(mirror=mirrors(diagonal))
    assert weigh_witnesses(findings).word == "disagree"
    (flag,) = raise_flags(findings)
    assert (flag.code, flag.severity) == ("witnesses-disagree", "error")
    assert flag.evidence["m(1 1 0) k=0"] == 0
    assert raise_flags(changed(mirror=mirrors(replace(diagonal, number=-3)))) == ()


def test_numbers_that_contradict_each_other() -> None:
    pair = mirrors(plane("m(0 0 1) k=0", 1), plane("m'(0 0 1) k=0", 0))
    findings = trivial(mirror=pair)
    assert any("another parity" in flag.summary for flag in raise_flags(findings))
    assert conclude(findings, raise_flags(findings)).class_ == "undetermined"


def test_rotation_eigenvalues_that_contradict_the_number() -> None:
    good = trivial(
        mirror=two(2, 0), mirror_indicators=(indicator(4, 2), indicator(4, 0, half=True))
    )
    assert raise_flags(good) == ()
    bad = trivial(mirror=two(2, 0), mirror_indicators=(indicator(4, 0),))
    (flag,) = raise_flags(bad)
    assert (flag.code, flag.severity) == ("witnesses-disagree", "error")
    assert (flag.evidence["mirror_chern"], flag.evidence["by_rotation"]) == (2, 0)


def test_a_crossing_on_a_mirror_plane_is_an_error() -> None:
    evidence = MirrorChern(
        "m(0 0 1) k=0", "failed", "the gap closes", None, None, None, 3, 3, 1.0, 0.0, 20,
        closes_near=(0.3, 0.3, 0.0),
    )  # fmt: skip
    failed = replace(
        plane("m(0 0 1) k=0", None, reason="the gap closes"), status="failed", evidence=evidence
    )
    findings = trivial(mirror=mirrors(failed))
    (flag,) = raise_flags(findings)
    assert (flag.code, flag.severity) == ("gap-closes", "error")
    assert conclude(findings, (flag,)).class_ == "undetermined"


def test_indicators_are_listed() -> None:
    findings = trivial(
        z4=2,
        s4=s4(6),
        mirror_indicators=(indicator(4, 1), indicator(4, 3, half=True), indicator(4, None)),
    )
    assert indicator_values(findings) == {
        "z4": 2, "z2w1": 0, "z2w2": 0, "z2w3": 0, "s4": 0, "z8": 6, "z4m k=0": 1, "z4m k=G/2": 3,
    }  # fmt: skip


@pytest.mark.parametrize(
    ("kappa", "at_0", "at_half", "z12"),
    [(0, 0, 0, 0), (1, 1, 0, 5), (2, 0, 0, 6), (3, 5, 0, 7), (0, 2, 0, 4), (0, 1, 1, 0)],
)
def test_z12_joins_kappa_and_mirror_numbers(kappa: int, at_0: int, at_half: int, z12: int) -> None:
    """kappa modulo 4, and the difference of the mirror Chern numbers modulo 3 (recalled)."""
    findings = changed(
        parity={"kappa": kappa, "centre": (0.0, 0.0, 0.0)},
        mirror_indicators=(indicator(6, at_0), indicator(6, at_half, half=True)),
    )
    assert indicator_values(findings)["z12"] == z12
    assert z12 % 4 == kappa % 4
