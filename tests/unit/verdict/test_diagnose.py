"""How causes are ranked, and what each would explain if mended. All cases invented."""

from __future__ import annotations

from dataclasses import fields, replace
from typing import Any

import numpy as np
import pytest
from invented_experiments import causes, diagnosis, named, reading, wilson

from invented_findings import SOUND, changed
from topovet.diagnosis.results import NoiseTest
from topovet.intake.records import CaseSettings
from topovet.invariants.results import WilsonPlane
from topovet.spectrum.results import InterpolationCheck
from topovet.symmetry.results import ShiftTest, SpinOrder
from topovet.verdict.advice import CODES
from topovet.verdict.diagnose import EXPLAINS, diagnose
from topovet.verdict.inquiry import findings_of, verdict_if

GAP_MEV = 700.0
"""Direct gap of the sound case; its robustness radius is half of that."""

CLOSED = {"direct_ev": 2e-6, "indirect_ev": 0.0, "status": "gapless"}
BROKEN = {"violation_mev": GAP_MEV, "violation_trim_mev": GAP_MEV}


# --- order


def test_order_is_by_weight_and_weights_are_shares() -> None:
    found = diagnosis(
        changed(gap=CLOSED, inversion=BROKEN, audit={"hermiticity_mev": 3.0}),
        reading("symmetrised", moved_mev=400.0),
    )
    weights = [cause.weight for cause in found.causes]
    assert weights == sorted(weights, reverse=True)
    assert all(0 <= weight <= 1 for weight in weights)


def test_what_is_ruled_out_weighs_nothing_and_gives_no_advice() -> None:
    found = diagnosis(changed(gap=CLOSED))
    ruled_out = [cause for cause in found.causes if cause.answer == "no"]
    assert ruled_out
    for cause in ruled_out:
        assert (cause.weight, cause.advice, cause.if_mended) == (0.0, "", None)
        assert cause.test.endswith(".")


def test_every_cause_is_a_flag_or_noise_and_says_what_was_tried() -> None:
    found = diagnosis(changed(gap=CLOSED, inversion=BROKEN), noise=(NoiseTest("x", 1, 1, 0),))
    for cause in found.causes:
        assert cause.cause in (*CODES, "noise")
        assert cause.test.endswith(".")
    assert set(EXPLAINS) <= {*CODES, "noise"}


def test_explanations_run_one_way() -> None:
    """Of two causes that may explain each other the earlier one is upstream; never itself."""
    for cause, explained in EXPLAINS.items():
        assert cause not in explained or cause in ("wilson-unresolved",)
        assert explained <= set(CODES)


def test_error_weighs_more_than_warning() -> None:
    mild = diagnosis(changed(audit={"hermiticity_mev": 360.0}))
    fatal = diagnosis(changed(audit={"hermiticity_mev": GAP_MEV}))
    assert causes(mild)["not-hermitian"].answer == causes(fatal)["not-hermitian"].answer == "yes"
    assert causes(mild)["not-hermitian"].weight < causes(fatal)["not-hermitian"].weight


def test_upstream_breaks_ties() -> None:
    found = diagnosis(
        changed(
            audit={"duplicate_r": ((0, 0, 1),), "duplicates_identical": False},
            electrons={"filling": 5},
        )
    )
    assert named(found)[:2] == ["duplicate-r", "filling-off"]


# --- consequences


def test_declaration_explains_the_symmetry_it_seems_to_break() -> None:
    findings = changed(
        inversion=BROKEN,
        parity={"status": "failed", "reason": "impure"},
        shift_test=ShiftTest("given", (3, 4), (3, 4), None, None, "As given."),
    )
    found = causes(diagnosis(findings, reading("declaration")))
    assert found["orbital-declaration-wrong"].consequence_of == ""
    assert found["symmetry-broken"].consequence_of == "orbital-declaration-wrong"
    assert found["symmetry-broken"].weight < found["orbital-declaration-wrong"].weight


def test_what_is_still_flagged_when_mended_was_not_explained() -> None:
    """The other declaration leaves inversion as broken as before: two causes."""
    findings = changed(
        inversion=BROKEN,
        shift_test=ShiftTest("given", (3, 4), (3, 4), None, None, "As given."),
    )
    no_better = reading("declaration", inversion=BROKEN)
    found = causes(diagnosis(findings, no_better))
    assert found["symmetry-broken"].consequence_of == ""


def test_damage_explains_by_rule_where_it_cannot_be_mended() -> None:
    findings = changed(audit={"degeneracy_sum": 60.5}, inversion=BROKEN, gap=CLOSED)
    found = causes(diagnosis(findings))
    assert found["range-truncated"].answer == "yes"
    assert found["gap-closes"].consequence_of == "range-truncated"
    assert found["symmetry-broken"].consequence_of == "range-truncated"


def test_missing_spin_orbit_coupling_explains_a_closed_gap() -> None:
    found = diagnosis(changed(time_reversal={"spin_mixing_mev": 0.01}, gap=CLOSED))
    assert named(found)[0] == "no-spin-orbit"
    assert causes(found)["gap-closes"].consequence_of == "no-spin-orbit"


def test_spin_order_stands_before_what_follows_from_it() -> None:
    order = SpinOrder("interlaced", 900.0, 900.0, 900.0, (2,), 0.02)
    findings = changed(
        spin_order=order, time_reversal={"present": False, "violation_mev": 900.0}, inversion=BROKEN
    )
    found = diagnosis(findings)
    assert named(found)[0] == "spin-order-mismatch"
    for cause in ("time-reversal-broken", "symmetry-broken"):
        assert causes(found)[cause].consequence_of == "spin-order-mismatch"


# --- if mended


def test_verdict_if_mended() -> None:
    findings = changed(electrons={"filling": 5}, gap=CLOSED)
    right = reading("filling", filling=6)
    found = causes(diagnosis(findings, right))
    mended = found["filling-off"].if_mended
    assert mended is not None
    assert (mended.z2, mended.class_, mended.agreement) == ((1, 0, 0, 0), "strong-ti", "agree")
    assert mended.gap_eV == right.gap.direct_ev
    assert found["gap-closes"].consequence_of == "filling-off"


def test_witnesses_that_still_differ_leave_the_mended_case_undetermined() -> None:
    findings = changed(electrons={"filling": 5}, gap=CLOSED)
    found = causes(diagnosis(findings, reading("filling", wilson=wilson((0, 0, 0, 0)))))
    mended = found["filling-off"].if_mended
    assert mended is not None
    assert (mended.z2, mended.class_, mended.agreement) == (None, "undetermined", "disagree")


def test_mending_lends_weight() -> None:
    findings = changed(electrons={"filling": 5}, gap=CLOSED)
    mends = causes(diagnosis(findings, reading("filling")))["filling-off"].weight
    does_not = causes(diagnosis(findings, reading("filling", gap=CLOSED)))["filling-off"].weight
    assert mends > does_not


def test_a_reading_replaces_all_that_rests_on_the_old_one() -> None:
    findings = replace(
        changed(declared={"settings": CaseSettings(inversion_centre=(0.1, 0.0, 0.0))}),
        interpolation=InterpolationCheck(3.0, None, 64, None, None, 0, 0),
        wilson=wilson((0, 0, 0, 0)),
    )
    moved = findings_of(findings, reading("centre", filling=4))
    assert moved.declared.settings.inversion_centre is None
    assert moved.electrons is not None
    assert moved.electrons.filling == 4
    assert moved.wilson is not None
    assert moved.wilson.z2 == (1, 0, 0, 0)
    assert (moved.declaration, moved.group, moved.mirror) == (None, None, None)
    assert moved.interpolation is findings.interpolation
    assert findings_of(findings, reading("filling")).interpolation is None
    entry, still = verdict_if(findings, reading("centre"))
    assert entry.class_ == "strong-ti"
    assert "inversion-centre-shifted" not in still


# --- single causes


@pytest.mark.parametrize(
    ("filled", "growth", "answer"),
    [(0.99, 0.1, "yes"), (0.3, 0.1, "no"), (0.99, 0.9, "no"), (0.99, None, "no")],
)
def test_noise(filled: float, growth: float | None, answer: str) -> None:
    broken = changed(time_reversal={"present": False, "violation_mev": 30.0})
    test = NoiseTest("time reversal", 4.2, filled, growth)
    found = causes(diagnosis(broken, reading("symmetrised", moved_mev=20.0), noise=(test,)))
    assert found["noise"].answer == answer
    expected = "noise" if answer == "yes" else ""
    assert found["time-reversal-broken"].consequence_of == expected


@pytest.mark.parametrize(
    ("indirect_ev", "typical_ev", "answer"),
    [
        (0.0, 1.5, "open"),  # bands touch, typically far apart: a node or a transition
        (0.0, 0.05, "yes"),  # inside a group of bands that belong together
        (-0.3, 1.5, "yes"),  # bands overlap: a metal at this filling
    ],
)
def test_another_filling_is_an_insulator(
    indirect_ev: float, typical_ev: float, answer: str
) -> None:
    findings = changed(gap=CLOSED | {"indirect_ev": indirect_ev})
    insulator = reading("filling", filling=8)
    found = diagnosis(findings, insulator, typical_gap_ev=typical_ev)
    assert causes(found)["filling-off"].answer == answer
    assert named(found)[0] == ("filling-off" if answer == "yes" else "gap-closes")


def test_no_other_filling_is_better() -> None:
    found = causes(diagnosis(changed(gap=CLOSED), reading("filling", filling=8, gap=CLOSED)))
    assert found["filling-off"].answer == "no"
    assert found["gap-closes"].answer == "yes"


def test_closed_gap_is_no_matter_of_the_error_bar() -> None:
    found = causes(diagnosis(changed(gap=CLOSED, decay={"rim_mev": 80.0})))
    assert found["inside-error-bar"].answer == "no"


def test_error_bar_names_the_largest_error() -> None:
    found = causes(diagnosis(changed(decay={"rim_mev": GAP_MEV, "largest_hopping_mev": 1e6})))
    assert found["inside-error-bar"].answer == "yes"
    assert found["inside-error-bar"].evidence["largest"] == "range"


def _plane(direct_ev: float) -> WilsonPlane:
    none = np.zeros(0)
    return WilsonPlane(
        plane="k1=0",
        across=(0, 1, 0),
        along=(0, 0, 1),
        status="ok",
        reason="",
        z2=1,
        lines=9,
        points_per_line=12,
        smallest_gap=0.2,
        smallest_singular_value=0.9,
        smallest_direct_gap_ev=direct_ev,
        narrowest_k=(0.0, 0.2, 0.3),
        kramers_splitting=0.0,
        n_solves=100,
        flow_across=none,
        flow_hwcc=none,
        gap_centres=none,
        references=none,
        crossings=none.astype(np.int64),
    )


def test_loops_may_meet_a_smaller_gap_than_the_search() -> None:
    loops = replace(wilson((1, 0, 0, 0)), planes=(_plane(5e-5),))
    found = causes(diagnosis(replace(SOUND, wilson=loops)))
    assert found["gap-closes"].answer == "yes"
    assert found["gap-closes"].evidence["k"] == [0.0, 0.2, 0.3]


def test_denser_lines_settle_what_was_unresolved() -> None:
    findings = replace(SOUND, wilson=wilson(None, "unresolved"))
    settled = causes(diagnosis(findings, reading("closer-look")))["wilson-unresolved"]
    assert settled.answer == "yes"
    assert settled.if_mended is not None
    assert settled.if_mended.agreement == "agree"
    still = reading("closer-look", wilson=wilson(None, "unresolved"))
    assert causes(diagnosis(findings, still))["wilson-unresolved"].answer == "no"


def test_outermost_hoppings_that_decide_nothing() -> None:
    findings = changed(decay={"rim_mev": 80.0})
    little = diagnosis(findings, reading("shorter-range", moved_mev=20.0))
    much = diagnosis(findings, reading("shorter-range", moved_mev=GAP_MEV))
    assert causes(little)["range-truncated"].answer == "no"
    assert causes(much)["range-truncated"].answer == "open"


@pytest.mark.parametrize(("moved_mev", "answer"), [(20.0, "no"), (GAP_MEV, "yes")])
def test_broken_symmetry_counts_by_how_far_the_mean_is(moved_mev: float, answer: str) -> None:
    findings = changed(inversion={"violation_mev": 40.0, "violation_trim_mev": 40.0})
    found = causes(diagnosis(findings, reading("symmetrised", moved_mev=moved_mev)))
    assert found["symmetry-broken"].answer == answer


def test_centres_that_were_mended_are_no_cause() -> None:
    orbital = SOUND.declared.orbitals
    findings = changed(shift_test=ShiftTest("mended", (3,), (), 900.0, 0.1, "Mended."))
    assert orbital == ()
    assert "centres-off" not in causes(diagnosis(findings))  # nothing is declared to test them on


def test_asked_because_is_kept() -> None:
    assert diagnosis(SOUND).asked_because == "flags were raised"
    assert diagnose.__doc__


@pytest.mark.parametrize(
    ("parts", "largest"),
    [
        ({"inversion": {"violation_mev": 720.0}, "decay": {"rim_mev": 40.0}}, "symmetry-broken"),
        ({"inversion": {"violation_mev": 40.0}, "decay": {"rim_mev": 360.0}}, "range-truncated"),
    ],
)
def test_largest_error_is_named_before_the_sum(parts: dict[str, Any], largest: str) -> None:
    """Neither moves bands by the radius, but together with the rest the errors fill it."""
    parts["inversion"] |= {"violation_trim_mev": parts["inversion"]["violation_mev"]}
    gap = {"direct_ev": 0.74, "indirect_ev": 0.74}
    findings = changed(**parts, gap=gap)
    found = diagnosis(
        findings,
        reading("symmetrised", moved_mev=20.0, gap=gap),
        reading("shorter-range", moved_mev=20.0, gap=gap),
    )
    assert causes(found)["inside-error-bar"].answer == "yes"
    assert named(found)[0] == largest


@pytest.mark.parametrize(("rounding_mev", "explained"), [(30.0, True), (3.0, False)])
def test_digits_explain_what_their_numbers_allow(rounding_mev: float, explained: bool) -> None:
    """Rounding E breaks inversion by 2 E at most."""
    findings = changed(
        audit={"rounding_mev": rounding_mev},
        inversion={"violation_mev": 40.0, "violation_trim_mev": 40.0},
    )
    found = causes(diagnosis(findings, reading("symmetrised", moved_mev=GAP_MEV)))
    upstream = "inside-error-bar" if explained else ""
    assert found["symmetry-broken"].consequence_of == upstream


def test_sum_of_errors_follows_from_its_largest_part() -> None:
    broken = {"violation_mev": 720.0, "violation_trim_mev": 720.0}
    gap = {"direct_ev": 0.74, "indirect_ev": 0.74}
    findings = changed(inversion=broken, decay={"rim_mev": 40.0}, gap=gap)
    found = causes(diagnosis(findings, reading("symmetrised", moved_mev=20.0, gap=gap)))
    assert found["inside-error-bar"].consequence_of == "symmetry-broken"


@pytest.mark.parametrize(("status", "answer"), [("ok", "yes"), ("failed", "open")])
def test_other_declaration_must_let_parities_be_read(status: str, answer: str) -> None:
    findings = changed(
        inversion=BROKEN,
        parity={"status": "failed", "reason": "impure"},
        shift_test=ShiftTest("given", (3, 4), (3, 4), None, None, "As given."),
    )
    other = reading("declaration", parity={"status": status}, inversion={"violation_mev": 90.0})
    found = diagnosis(findings, other)
    assert causes(found)["orbital-declaration-wrong"].answer == answer
    first = "orbital-declaration-wrong" if answer == "yes" else "symmetry-broken"
    assert named(found)[0] == first


def test_no_witness_of_the_old_reading_is_carried_over() -> None:
    """Whatever witnesses there are: only what the reading itself was put to may speak."""
    asked_again = {"time_reversal", "inversion", "electrons", "gap", "parity", "wilson"}
    of_the_files = {
        "declared",
        "spinful",
        "audit",
        "decay",
        "spin_order",
        "shift_test",
        "space_group",
        "inferred",
        "symmetry_class",
        "interpolation",
        "missing",
    }
    everything: dict[str, Any] = {
        f.name: object() for f in fields(SOUND) if f.name not in asked_again
    }
    findings = replace(SOUND, **{k: v for k, v in everything.items() if k not in of_the_files})
    moved = findings_of(findings, reading("symmetrised"))
    for name in everything.keys() - of_the_files:
        assert not getattr(moved, name), name


@pytest.mark.parametrize("cut", [False, True])
def test_misread_shifts_put_hoppings_on_the_rim(cut: bool) -> None:
    """Bands unlike Wannier90's own explain a large rim; a list that was cut explains them."""
    findings = changed(
        interpolation=InterpolationCheck(None, None, 0, 900.0, 900.0, 100, None),
        decay={"rim_mev": 400.0},
        audit={"degeneracy_sum": 60.5 if cut else 64.0},
    )
    found = diagnosis(findings, reading("shorter-range", moved_mev=400.0))
    first, then = ("range-truncated", "interpolation-poor")[:: 1 if cut else -1]
    assert named(found)[0] == first
    assert causes(found)[then].consequence_of == first


@pytest.mark.parametrize(("moved_mev", "shown"), [(100.0, True), (3 * GAP_MEV, False)])
def test_an_average_too_far_away_shows_no_indices(moved_mev: float, shown: bool) -> None:
    """Beyond half of either gap another phase may lie between; the weight stays what it was."""
    average = reading("symmetrised", moved_mev=moved_mev)
    cause = causes(diagnosis(changed(inversion=BROKEN), average))["symmetry-broken"]
    assert (cause.if_mended is not None) is shown
    assert ("too far" in cause.finding) is not shown
    assert cause.answer == "yes"
