"""What a proof of the gap changes in the verdict. All numbers invented."""

from __future__ import annotations

from dataclasses import replace

import pytest

from invented_findings import SOUND, changed
from topovet.invariants.results import WilsonWitness
from topovet.spectrum.proof.results import GapProof, IndirectGapProof
from topovet.spectrum.results import InterpolationCheck
from topovet.verdict.document import Verdict
from topovet.verdict.findings import Findings
from topovet.verdict.judge import judge

PROOF = GapProof(
    quantity="direct",
    filling=18,
    proved_min_ev=0.69,
    attained_ev=0.7,
    k_frac=(0.0, 0.0, 0.0),
    status="proved",
    reason="",
    tolerance_ev=0.014,
    elsewhere_ev=0.69,
    n_boxes=900,
    n_open=0,
    n_solves=1200,
    n_operations=4,
    symmetry_residual_ev=1e-4,
    symmetry_cost_ev=2e-4,
    rounding_ev=1e-9,
)
ENDED = replace(
    PROOF,
    status="budget ended",
    reason="40 boxes were left when the budget was spent",
    proved_min_ev=0.2,
    n_open=40,
)


def _judged(findings: Findings) -> Verdict:
    return judge(findings, inputs=(), settings={}, task_seconds={})


def _two_witnesses(proof: GapProof | None) -> Findings:
    assert SOUND.parity is not None
    wilson = WilsonWitness("ok", "", SOUND.parity.z2, (), (), (), 1200)
    return replace(changed(wilson=wilson), gap_proof=proof)


def test_proved_gap_and_two_witnesses_get_the_best_grade() -> None:
    verdict = _judged(_two_witnesses(PROOF))
    assert verdict.confidence.grade == "A"
    assert any("proved to exceed 690 meV" in r for r in verdict.confidence.reasons)
    assert (verdict.gap.method, verdict.gap.direct_proved_min_eV) == ("proved", 0.69)
    assert verdict.robustness.proved
    assert verdict.robustness.radius_meV == pytest.approx(345.0)


def test_one_witness_stays_below_it() -> None:
    assert _judged(replace(SOUND, gap_proof=PROOF)).confidence.grade == "B"


@pytest.mark.parametrize("proof", [None, replace(ENDED, proved_min_ev=0.0)])
def test_what_is_not_proved_is_called_sampled(proof: GapProof | None) -> None:
    verdict = _judged(_two_witnesses(proof))
    assert verdict.confidence.grade == "B"
    assert (verdict.gap.method, verdict.gap.direct_proved_min_eV) == ("sampled", None)
    assert not verdict.robustness.proved
    assert SOUND.gap is not None
    assert verdict.robustness.radius_meV == pytest.approx(500.0 * SOUND.gap.direct_ev)
    said = " ".join(verdict.confidence.reasons)
    assert "sampled, not proved" in said
    if proof is not None:
        assert "40 boxes were left" in said


def test_a_loose_bound_is_stated_but_does_not_stand_for_the_gap() -> None:
    verdict = _judged(_two_witnesses(ENDED))
    assert (verdict.gap.method, verdict.gap.direct_proved_min_eV) == ("bounded", 0.2)
    assert (verdict.confidence.grade, verdict.robustness.proved) == ("B", False)
    assert SOUND.gap is not None
    assert verdict.robustness.radius_meV == pytest.approx(500.0 * SOUND.gap.direct_ev)
    said = " ".join(verdict.confidence.reasons)
    assert "proved to exceed 200 meV at every k, too far below the 0.700 eV attained" in said
    assert "40 boxes were left" in said


def test_the_bound_of_an_early_end_counts_where_it_is_near() -> None:
    verdict = _judged(_two_witnesses(replace(ENDED, proved_min_ev=0.4)))
    assert (verdict.gap.method, verdict.confidence.grade) == ("proved", "A")
    assert verdict.robustness.radius_meV == pytest.approx(200.0)


def test_an_indirect_gap_is_stated_where_its_bound_is_positive() -> None:
    edge = replace(PROOF, quantity="valence", proved_min_ev=-1.0, attained_ev=-0.99)
    other = replace(PROOF, quantity="conduction", proved_min_ev=1.4, attained_ev=1.41)
    proof = IndirectGapProof(0.4, 0.42, edge, other, "proved")
    found = replace(_two_witnesses(PROOF), indirect_proof=proof)
    assert _judged(found).gap.indirect_proved_min_eV == 0.4
    overlap = replace(found, indirect_proof=replace(proof, proved_min_ev=-0.1))
    assert _judged(overlap).gap.indirect_proved_min_eV is None


def test_errors_above_half_of_the_proved_radius_lower_the_grade() -> None:
    """Half of 690/2 meV is 172.5: an error of 173 meV is fine for the sampled gap alone."""
    findings = _two_witnesses(PROOF)
    decay = replace(findings.decay, rim_mev=173.5, largest_hopping_mev=1e6)
    assert _judged(replace(findings, decay=decay)).confidence.grade == "C"


@pytest.mark.parametrize(
    ("source", "expected"), [("wsvec file", 7.0), ("rebuilt from declared sites", 3.0)]
)
def test_differences_between_mesh_points_count_with_the_same_shifts(
    source: str, expected: float
) -> None:
    check = InterpolationCheck(3.0, None, 64, 7.0, 9.0, 100, 0)
    audit = replace(SOUND.audit, shift_source=source)
    verdict = _judged(replace(SOUND, interpolation=check, audit=audit))
    assert verdict.robustness.errors_meV["interpolation"] == expected
