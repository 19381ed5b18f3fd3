"""Which flag is raised for what, and what the verdict then stands behind. All cases invented."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

import invented_dossiers as invented
from topovet.intake.records import CaseSettings
from topovet.invariants.results import (
    ChernWitness,
    ParityWitness,
    TrimParity,
    WilsonWitness,
)
from topovet.model.declarations import Declarations
from topovet.spectrum.results import InterpolationCheck
from topovet.symmetry.inversion import no_inversion
from topovet.symmetry.results import ShiftTest, SpinOrder
from topovet.verdict.advice import CODES
from topovet.verdict.conclude import conclude
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.grade import grade
from topovet.verdict.judge import judge, raise_flags


def _sound() -> Findings:
    material = invented.strong()
    assert material.parity is not None
    return Findings(
        declared=Declarations(
            name="QV-7",
            crystal=material.crystal,
            spinful=True,
            mp_grid=None,
            orbitals=(),
            undeclared_reason="",
            settings=CaseSettings(),
            structure_cell=None,
            structure_offset_ang=None,
            structure_file="POSCAR",
            win_file="QV-7.win",
            win_fermi_ev=None,
            use_ws_distance=True,
            ws_distance_tol=1e-5,
            ws_search_size=(2, 2, 2),
        ),
        spinful=True,
        audit=replace(
            material.audit,
            mesh_points=64,
            degeneracy_sum=64.0,
            all_degeneracies_one=False,
            duplicate_r=(),
            missing_partner_r=(),
            n_missing_partner=0,
            hermiticity_mev=0.0,
            centre_offsets_ang=(0.01,) * 12,
        ),
        decay=replace(material.decay, rim_mev=2.0, largest_hopping_mev=900.0),
        spin_order=SpinOrder("interlaced", 0.0009, 900.0, 900.0),
        shift_test=ShiftTest("given", (), (), None, None, ""),
        space_group=material.space_group,
        inferred=None,
        symmetry_class=None,
        time_reversal=material.time_reversal,
        inversion=material.inversion,
        electrons=material.electrons,
        gap=material.gap,
        group=None,
        parity=material.parity,
        inferred_parity=None,
        wilson=None,
        chern=None,
        s4=None,
        interpolation=None,
        missing={},
    )


def _wilson(z2: tuple[int, ...] | None, status: str = "ok", reason: str = "") -> WilsonWitness:
    return WilsonWitness(status, reason, z2, (), (), (), 1200)


def _chern(values: tuple[int, ...] | None, status: str = "ok") -> ChernWitness:
    reason = "" if status == "ok" else "parallel planes differ"
    return ChernWitness(status, reason, values, (), (), 900)


SOUND = _sound()
GAP_MEV = 700.0


def _changed(**parts: Any) -> Findings:
    """The sound case with attributes of its parts changed: part=dict(attribute=value)."""
    return replace(
        SOUND,
        **{
            name: replace(getattr(SOUND, name), **value) if isinstance(value, dict) else value
            for name, value in parts.items()
        },
    )


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
    "not-hermitian": (_changed(audit={"hermiticity_mev": 3.0}), "warning"),
    "not-hermitian, fatal": (_changed(audit={"hermiticity_mev": GAP_MEV}), "error"),
    "duplicate-r": (
        _changed(audit={"duplicate_r": ((0, 0, 1),), "duplicates_identical": True}),
        "warning",
    ),
    "duplicate-r, conflicting": (
        _changed(audit={"duplicate_r": ((0, 0, 1),), "duplicates_identical": False}),
        "error",
    ),
    "missing-partner-r": (
        _changed(audit={"n_missing_partner": 1, "missing_partner_r": ((1, 0, 0),)}),
        "warning",
    ),
    "range-truncated, sum": (_changed(audit={"degeneracy_sum": 60.5}), "error"),
    "range-truncated, unweighted": (
        _changed(audit={"degeneracy_sum": 27.0, "all_degeneracies_one": True}),
        "warning",
    ),
    "range-truncated, rim": (_changed(decay={"rim_mev": 80.0}), "warning"),
    "centres-off": (
        _changed(shift_test=ShiftTest("mended", (3, 4), (), 900.0, 0.1, "Mended.")),
        "warning",
    ),
    "orbital-declaration-wrong": (
        _changed(shift_test=ShiftTest("given", (3, 4), (3, 4), None, None, "As given.")),
        "error",
    ),
    "cell-mismatch": (_changed(declared={"structure_cell": 5 * np.eye(3)}), "warning"),
    "cell-mismatch, atoms": (_changed(declared={"structure_offset_ang": 0.3}), "warning"),
    "cell-mismatch, composition": (
        _changed(declared={"structure_offset_ang": np.inf}),
        "warning",
    ),
    "spin-order-mismatch": (
        _changed(spin_order=SpinOrder("block", 900.0, 0.001, 900.0)),
        "warning",
    ),
    "spin-order-mismatch, declared spinless": (
        _changed(spinful=False, spin_order=SpinOrder("none", 0.002, 900.0, 900.0)),
        "error",
    ),
    "time-reversal-broken": (
        _changed(time_reversal={"present": False, "violation_mev": 30.0}),
        "warning",
    ),
    "time-reversal-broken, by the shifts": (
        _changed(time_reversal={"violation_mev": 4.0}),
        "info",
    ),
    "time-reversal-broken, by the shifts beyond the gap": (
        _changed(time_reversal={"violation_mev": GAP_MEV}),
        "error",
    ),
    "no-spin-orbit, spinless": (_changed(spinful=False), "warning"),
    "no-spin-orbit": (_changed(time_reversal={"spin_mixing_mev": 0.01}), "warning"),
    "symmetry-broken": (_changed(inversion={"violation_mev": 40.0}), "warning"),
    "symmetry-broken, parities unreadable": (
        _changed(
            inversion={"violation_mev": 40.0},
            parity=ParityWitness("failed", "impure", None, None, None, None, None, (), ()),
        ),
        "error",
    ),
    "inversion-centre-shifted": (
        _changed(declared={"settings": CaseSettings(inversion_centre=(0.1, 0.0, 0.0))}),
        "error",
    ),
    "filling-off, odd": (_changed(electrons={"filling": 5}), "error"),
    "filling-off, by the Fermi energy": (
        _changed(electrons={"fermi_ev": 5.4, "mean_count": 4.0}),
        "error",
    ),
    "fermi-outside-gap": (_changed(electrons={"fermi_ev": 5.9, "mean_count": 6.02}), "warning"),
    "gap-closes": (_changed(gap={"direct_ev": 2e-6, "status": "gapless"}), "error"),
    "gap-closes, too small to tell": (
        _changed(gap={"direct_ev": 4e-4, "status": "unresolved"}),
        "error",
    ),
    "interpolation-poor": (
        _changed(interpolation=InterpolationCheck(30.0, None, 64, None, None, 0, 0)),
        "warning",
    ),
    "interpolation-poor, fatal": (
        _changed(interpolation=InterpolationCheck(360.0, None, 64, None, None, 0, 0)),
        "error",
    ),
    "interpolation-poor, path": (
        _changed(interpolation=InterpolationCheck(None, None, 0, 7.0, 8.0, 100, None)),
        "warning",
    ),
    "parity-impure": (_changed(parity={"trim": _trim(purity=0.9)}), "warning"),
    "parity-impure, unreadable": (
        _changed(parity={"trim": _trim(purity=0.5), "status": "failed", "reason": "impure"}),
        "error",
    ),
    "symmetry-broken, beyond the gap": (_changed(inversion={"violation_mev": GAP_MEV}), "error"),
    "symmetry-broken, by missing shifts": (
        _changed(inversion={"violation_mev": GAP_MEV}, audit={"shift_source": "not available"}),
        "warning",
    ),
    "witnesses-disagree": (_changed(wilson=_wilson((0, 0, 0, 0))), "error"),
    "wilson-unresolved": (
        _changed(wilson=_wilson(None, "unresolved", "the budget ended")),
        "warning",
    ),
    "wilson-unresolved, planes at odds": (
        _changed(wilson=_wilson(None, "failed", "nu0 differs")),
        "error",
    ),
    "inside-error-bar": (
        _changed(decay={"rim_mev": GAP_MEV, "largest_hopping_mev": 1e6}),
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
    findings = _changed(
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
    findings = _changed(parity={"z2": z2, "z4": z4})
    conclusion = conclude(findings, ())
    assert conclusion.class_ == class_
    assert conclusion.invariants.z2 == z2
    assert conclusion.invariants.z4 == z4


@pytest.mark.parametrize(
    ("eta", "word"), [(1, "cannot be gapped"), (2, "axion candidate"), (0, "")]
)
def test_without_time_reversal_only_the_indicator_is_stated(eta: int, word: str) -> None:
    findings = _changed(
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
        _changed(wilson=_wilson(SOUND.parity.z2)), inputs=(), settings={}, task_seconds={}
    )
    assert verdict.agreement == "agree"
    assert verdict.flags == ()
    assert verdict.confidence.grade == "B"
    assert any("independent witnesses agree" in reason for reason in verdict.confidence.reasons)


def test_what_a_working_witness_contradicts_is_not_asserted() -> None:
    verdict = judge(_changed(wilson=_wilson((0, 0, 0, 0))), inputs=(), settings={}, task_seconds={})
    assert verdict.agreement == "disagree"
    assert verdict.class_ == "undetermined"
    assert verdict.invariants.z2 is None
    assert verdict.witnesses.parity.z2 != verdict.witnesses.wilson.z2


def test_wilson_speaks_where_parity_cannot() -> None:
    findings = _changed(
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
    findings = _changed(
        time_reversal={"present": False, "violation_mev": 30.0},
        parity={"z2": None, "z4": None, "kappa": None, "eta4": eta},
        chern=_chern(values, "ok" if values else "failed"),
    )
    conclusion = conclude(findings, raise_flags(findings))
    assert conclusion.class_ == class_
    assert conclusion.invariants.z2 is None


def test_without_inversion_the_verdict_is_undetermined_and_says_why() -> None:
    reason = "space group 156 (P3m1) has no inversion"
    findings = _changed(parity=None, inversion=no_inversion(reason))
    verdict = judge(findings, inputs=(), settings={}, task_seconds={})
    assert verdict.class_ == "undetermined"
    assert verdict.agreement == "undetermined"
    assert verdict.witnesses.parity.status == "not-applicable"
    assert verdict.witnesses.parity.reason == reason
    assert any(reason in text for text in verdict.confidence.reasons)


def test_large_error_budget_lowers_the_grade_without_a_flag() -> None:
    findings = _changed(decay={"rim_mev": 0.3 * GAP_MEV, "largest_hopping_mev": 1e6})
    flags: tuple[Flag, ...] = raise_flags(findings)
    assert flags == ()
    assert grade(findings, conclude(findings, flags), flags).grade == "C"
