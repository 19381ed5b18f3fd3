"""Which flag is raised for what, and what the verdict then stands behind. All cases invented."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from invented_findings import SOUND, changed
from topovet.intake.records import CaseSettings
from topovet.invariants.results import (
    ChernWitness,
    ParityWitness,
    TrimParity,
    WilsonWitness,
)
from topovet.spectrum.results import InterpolationCheck
from topovet.symmetry.inversion import no_inversion
from topovet.symmetry.results import ShiftTest, SpinOrder
from topovet.verdict.advice import CODES
from topovet.verdict.conclude import conclude
from topovet.verdict.flags import Flag
from topovet.verdict.grade import grade
from topovet.verdict.judge import judge
from topovet.verdict.raised import raise_flags


def _wilson(z2: tuple[int, ...] | None, status: str = "ok", reason: str = "") -> WilsonWitness:
    return WilsonWitness(status, reason, z2, (), (), (), 1200)


def _chern(values: tuple[int, ...] | None, status: str = "ok") -> ChernWitness:
    reason = "" if status == "ok" else "parallel planes differ"
    return ChernWitness(status, reason, values, (), (), 900)


GAP_MEV = 700.0


def _trim(**changes: Any) -> tuple[TrimParity, ...]:
    """The sound parities with the last TRIM changed."""
    assert SOUND.parity is not None
    *others, last = SOUND.parity.trim
    return (*others, replace(last, **changes))


def test_sound_case_raises_no_flag_and_gets_the_best_grade_of_one_witness() -> None:
    flags = raise_flags(SOUND)
    assert flags == ()
    conclusion = conclude(SOUND, flags)
    assert conclusion.class_ == "strong-ti"
    assert conclusion.agreement == "one-witness"
    assert SOUND.parity is not None
    assert conclusion.invariants.z2 == SOUND.parity.z2
    assert grade(SOUND, conclusion, flags).grade == "B"


FAULTS = {
    "not-hermitian": (changed(audit={"hermiticity_mev": 3.0}), "warning"),
    "not-hermitian, fatal": (changed(audit={"hermiticity_mev": GAP_MEV}), "error"),
    "duplicate-r": (
        changed(audit={"duplicate_r": ((0, 0, 1),), "duplicates_identical": True}),
        "warning",
    ),
    "duplicate-r, conflicting": (
        changed(audit={"duplicate_r": ((0, 0, 1),), "duplicates_identical": False}),
        "error",
    ),
    "missing-partner-r": (
        changed(audit={"n_missing_partner": 1, "missing_partner_r": ((1, 0, 0),)}),
        "warning",
    ),
    "range-truncated, sum": (changed(audit={"degeneracy_sum": 60.5}), "error"),
    "range-truncated, unweighted": (
        changed(audit={"degeneracy_sum": 27.0, "all_degeneracies_one": True}),
        "warning",
    ),
    "range-truncated, rim": (changed(decay={"rim_mev": 80.0}), "warning"),
    "centres-off": (
        changed(shift_test=ShiftTest("mended", (3, 4), (), 900.0, 0.1, "Mended.")),
        "warning",
    ),
    "orbital-declaration-wrong": (
        changed(shift_test=ShiftTest("given", (3, 4), (3, 4), None, None, "As given.")),
        "error",
    ),
    "cell-mismatch": (changed(declared={"structure_cell": 5 * np.eye(3)}), "warning"),
    "cell-mismatch, atoms": (changed(declared={"structure_offset_ang": 0.3}), "warning"),
    "cell-mismatch, composition": (
        changed(declared={"structure_offset_ang": np.inf}),
        "warning",
    ),
    "spin-order-mismatch": (
        changed(spin_order=SpinOrder("block", 900.0, 0.001, 900.0)),
        "warning",
    ),
    "spin-order-mismatch, declared spinless": (
        changed(spinful=False, spin_order=SpinOrder("none", 0.002, 900.0, 900.0)),
        "error",
    ),
    "time-reversal-broken": (
        changed(time_reversal={"present": False, "violation_mev": 30.0}),
        "warning",
    ),
    "time-reversal-broken, by the shifts": (
        changed(time_reversal={"violation_mev": 4.0}),
        "info",
    ),
    "time-reversal-broken, by the shifts beyond the gap": (
        changed(time_reversal={"violation_mev": GAP_MEV}),
        "error",
    ),
    "no-spin-orbit, spinless": (changed(spinful=False), "warning"),
    "no-spin-orbit": (changed(time_reversal={"spin_mixing_mev": 0.01}), "warning"),
    "symmetry-broken": (changed(inversion={"violation_mev": 40.0}), "warning"),
    "symmetry-broken, parities unreadable": (
        changed(
            inversion={"violation_mev": 40.0},
            parity=ParityWitness("failed", "impure", None, None, None, None, None, (), ()),
        ),
        "error",
    ),
    "inversion-centre-shifted": (
        changed(declared={"settings": CaseSettings(inversion_centre=(0.1, 0.0, 0.0))}),
        "error",
    ),
    "filling-off, odd": (changed(electrons={"filling": 5}), "error"),
    "filling-off, by the Fermi energy": (
        changed(electrons={"fermi_ev": 5.4, "mean_count": 4.0}),
        "error",
    ),
    "fermi-outside-gap": (changed(electrons={"fermi_ev": 5.9, "mean_count": 6.02}), "warning"),
    "gap-closes": (changed(gap={"direct_ev": 2e-6, "status": "gapless"}), "error"),
    "gap-closes, too small to tell": (
        changed(gap={"direct_ev": 4e-4, "status": "unresolved"}),
        "error",
    ),
    "interpolation-poor": (
        changed(interpolation=InterpolationCheck(30.0, None, 64, None, None, 0, 0)),
        "warning",
    ),
    "interpolation-poor, fatal": (
        changed(interpolation=InterpolationCheck(360.0, None, 64, None, None, 0, 0)),
        "error",
    ),
    "interpolation-poor, path": (
        changed(interpolation=InterpolationCheck(None, None, 0, 7.0, 8.0, 100, None)),
        "warning",
    ),
    "parity-impure": (changed(parity={"trim": _trim(purity=0.9)}), "warning"),
    "parity-impure, unreadable": (
        changed(parity={"trim": _trim(purity=0.5), "status": "failed", "reason": "impure"}),
        "error",
    ),
    "symmetry-broken, beyond the gap": (changed(inversion={"violation_mev": GAP_MEV}), "error"),
    "symmetry-broken, by missing shifts": (
        changed(inversion={"violation_mev": GAP_MEV}, audit={"shift_source": "not available"}),
        "warning",
    ),
    "witnesses-disagree": (changed(wilson=_wilson((0, 0, 0, 0))), "error"),
    "wilson-unresolved": (
        changed(wilson=_wilson(None, "unresolved", "the budget ended")),
        "warning",
    ),
    "wilson-unresolved, planes at odds": (
        changed(wilson=_wilson(None, "failed", "nu0 differs")),
        "error",
    ),
    "inside-error-bar": (
        changed(decay={"rim_mev": GAP_MEV, "largest_hopping_mev": 1e6}),
        "warning",
    ),
}


@pytest.mark.parametrize("fault", FAULTS)
def test_each_fault_raises_its_flag(fault: str) -> None:
    findings, severity = FAULTS[fault]
    code = fault.split(",")[0]
    raised = [flag for flag in raise_flags(findings) if flag.code == code]
    assert [flag.severity for flag in raised] == [severity]
    flag = raised[0]
    assert flag.code in CODES
    assert flag.summary.endswith(".")
    assert flag.advice.endswith(".")
    assert flag.evidence


@pytest.mark.parametrize("fault", FAULTS)
def test_error_flags_leave_nothing_asserted(fault: str) -> None:
    findings, severity = FAULTS[fault]
    verdict = judge(findings, inputs=(), settings={}, task_seconds={})
    assert verdict.flags
    if severity == "error":
        assert verdict.class_ == "undetermined"
        assert verdict.invariants.z2 is None
        assert verdict.confidence.grade == "D"
    else:
        assert "error" not in {flag.severity for flag in verdict.flags}


BESIDE = ("fermi-outside-gap", "centres-off", "spin-order-mismatch")


@pytest.mark.parametrize("fault", [f for f in FAULTS if FAULTS[f][1] == "warning"])
def test_warnings_that_touch_the_verdict_lower_the_grade(fault: str) -> None:
    findings, _ = FAULTS[fault]
    verdict = judge(findings, inputs=(), settings={}, task_seconds={})
    if verdict.class_ == "undetermined":  # no Kramers pairs: no index to grade
        assert verdict.confidence.grade == "D"
    else:
        assert verdict.confidence.grade == ("B" if fault.split(",")[0] in BESIDE else "C")


def test_flags_stand_in_order_of_severity() -> None:
    findings = changed(
        electrons={"filling": 5}, decay={"rim_mev": 80.0}, time_reversal={"violation_mev": 4.0}
    )
    severities = [flag.severity for flag in raise_flags(findings)]
    assert severities == ["error", "warning", "info"]


@pytest.mark.parametrize(
    ("z2", "z4", "class_"),
    [
        ((1, 0, 0, 0), 1, "strong-ti"),
        ((1, 1, 1, 1), 3, "strong-ti"),
        ((0, 0, 0, 1), 0, "weak-ti"),
        ((0, 0, 0, 1), 2, "weak-ti"),
        ((0, 0, 0, 0), 2, "higher-order"),
        ((0, 0, 0, 0), 0, "trivial"),
    ],
)
def test_class_follows_the_indices(z2: tuple[int, ...], z4: int, class_: str) -> None:
    findings = changed(parity={"z2": z2, "z4": z4})
    conclusion = conclude(findings, ())
    assert conclusion.class_ == class_
    assert conclusion.invariants.z2 == z2
    assert conclusion.invariants.z4 == z4


@pytest.mark.parametrize(
    ("eta", "word"), [(1, "cannot be gapped"), (2, "axion candidate"), (0, "")]
)
def test_without_time_reversal_only_the_indicator_is_stated(eta: int, word: str) -> None:
    findings = changed(
        time_reversal={"present": False, "violation_mev": 30.0},
        parity={"z2": None, "z4": None, "kappa": None, "eta4": eta},
    )
    conclusion = conclude(findings, raise_flags(findings))
    assert conclusion.class_ == "undetermined"
    assert conclusion.invariants.z2 is None
    assert conclusion.invariants.indicators == {"eta4": eta}
    assert any(word in ground for ground in conclusion.grounds)


def test_two_witnesses_that_agree() -> None:
    assert SOUND.parity is not None
    verdict = judge(
        changed(wilson=_wilson(SOUND.parity.z2)), inputs=(), settings={}, task_seconds={}
    )
    assert verdict.agreement == "agree"
    assert verdict.flags == ()
    assert verdict.confidence.grade == "B"
    assert any("independent witnesses agree" in reason for reason in verdict.confidence.reasons)


def test_what_a_working_witness_contradicts_is_not_asserted() -> None:
    verdict = judge(changed(wilson=_wilson((0, 0, 0, 0))), inputs=(), settings={}, task_seconds={})
    assert verdict.agreement == "disagree"
    assert verdict.class_ == "undetermined"
    assert verdict.invariants.z2 is None
    assert verdict.witnesses.parity.z2 != verdict.witnesses.wilson.z2


def test_wilson_speaks_where_parity_cannot() -> None:
    findings = changed(
        parity=None,
        inversion=no_inversion("space group 156 (P3m1) has no inversion"),
        wilson=_wilson((1, 0, 0, 1)),
    )
    verdict = judge(findings, inputs=(), settings={}, task_seconds={})
    assert verdict.class_ == "strong-ti"
    assert verdict.agreement == "one-witness"
    assert verdict.invariants.z2 == (1, 0, 0, 1)
    assert verdict.invariants.z4 is None


@pytest.mark.parametrize(
    ("values", "eta", "class_"),
    [
        ((0, 0, 1), 0, "chern"),
        ((0, 0, 0), 0, "undetermined"),  # a weak phase in a small field has no other values
        ((0, 0, 0), 2, "axion-candidate"),
        ((0, 0, 2), 2, "chern"),
        ((0, 0, 0), 1, "undetermined"),
        (None, 0, "undetermined"),
    ],
)
def test_without_time_reversal_chern_numbers_speak(
    values: tuple[int, ...] | None, eta: int, class_: str
) -> None:
    findings = changed(
        time_reversal={"present": False, "violation_mev": 30.0},
        parity={"z2": None, "z4": None, "kappa": None, "eta4": eta},
        chern=_chern(values, "ok" if values else "failed"),
    )
    conclusion = conclude(findings, raise_flags(findings))
    assert conclusion.class_ == class_
    assert conclusion.invariants.z2 is None


def test_without_inversion_the_verdict_is_undetermined_and_says_why() -> None:
    reason = "space group 156 (P3m1) has no inversion"
    findings = changed(parity=None, inversion=no_inversion(reason))
    verdict = judge(findings, inputs=(), settings={}, task_seconds={})
    assert verdict.class_ == "undetermined"
    assert verdict.agreement == "undetermined"
    assert verdict.witnesses.parity.status == "not-applicable"
    assert verdict.witnesses.parity.reason == reason
    assert any(reason in text for text in verdict.confidence.reasons)


def test_large_error_budget_lowers_the_grade_without_a_flag() -> None:
    findings = changed(decay={"rim_mev": 0.3 * GAP_MEV, "largest_hopping_mev": 1e6})
    flags: tuple[Flag, ...] = raise_flags(findings)
    assert flags == ()
    assert grade(findings, conclude(findings, flags), flags).grade == "C"
