"""Flags from the files where one damage looks like another. All cases invented."""

from __future__ import annotations

from typing import Any

import pytest

from invented_findings import changed
from topovet.spectrum.results import InterpolationCheck
from topovet.verdict.findings import Findings
from topovet.verdict.flags import Flag
from topovet.verdict.raised import raise_flags


def _flag(findings: Findings, code: str) -> Flag | None:
    return next((flag for flag in raise_flags(findings) if flag.code == code), None)


@pytest.mark.parametrize(
    ("hermiticity_mev", "severity"),
    [
        (39.0, "warning"),  # the damage breaks time reversal by 78 meV at most, found are 80
        (40.0, "error"),
        (60.0, "error"),
    ],
)
def test_damage_that_may_be_all_that_breaks_time_reversal_is_fatal(
    hermiticity_mev: float, severity: str
) -> None:
    findings = changed(
        audit={"hermiticity_mev": hermiticity_mev},
        time_reversal={"present": False, "violation_mev": 80.0},
    )
    flag = _flag(findings, "not-hermitian")
    assert flag is not None
    assert flag.severity == severity
    assert ("all that breaks time reversal" in flag.summary) == (severity == "error")


@pytest.mark.parametrize(
    ("audit", "cut"),
    [
        ({"weakest_block_mev": 3.0, "last_digit_mev": 0.001}, True),
        ({"weakest_block_mev": 3.0, "last_digit_mev": 0.0}, True),
        ({"weakest_block_mev": 0.05, "last_digit_mev": 0.001}, False),
        ({"weakest_block_mev": 3.0, "last_digit_mev": 1.0}, False),  # rounded to zero
        ({"weakest_block_mev": 150.0, "last_digit_mev": 1.0}, True),
    ],
)
def test_blocks_that_rounding_made_zero_were_not_cut_off(audit: dict[str, Any], cut: bool) -> None:
    flag = _flag(changed(audit={"n_zero_r": 12, **audit}), "range-truncated")
    assert (flag is not None) == cut


RADIUS_MEV = 350.0


@pytest.mark.parametrize(
    ("rounding_mev", "parts", "severity", "said"),
    [
        (RADIUS_MEV, {}, "error", "robustness radius is 350 meV"),
        (349.0, {}, None, ""),
        (20.0, {"inversion": {"violation_mev": 40.0}}, "warning", "stands behind broken inversion"),
        (19.9, {"inversion": {"violation_mev": 40.0}}, None, ""),
        (
            20.0,
            {"time_reversal": {"violation_mev": 40.0}, "inversion": {"violation_mev": 40.0}},
            "warning",
            "broken time reversal and broken inversion",
        ),
        (
            30.0,
            {"interpolation": InterpolationCheck(30.0, None, 64, None, None, 0, 0)},
            "warning",
            "wrong energies on the mesh",
        ),
        (29.0, {"interpolation": InterpolationCheck(30.0, None, 64, None, None, 0, 0)}, None, ""),
        # violations within their tolerance need no explanation
        (20.0, {"inversion": {"violation_mev": 0.9}}, None, ""),
        # a closed gap has a flag of its own, and the usual digits would not help
        (0.3, {"gap": {"direct_ev": 2e-6, "status": "gapless"}}, None, ""),
        (1.0, {"gap": {"direct_ev": 2e-6, "status": "gapless"}}, "error", "up to 1.00 meV"),
    ],
)
def test_digits(
    rounding_mev: float, parts: dict[str, Any], severity: str | None, said: str
) -> None:
    """Rounding E moves energies by E and breaks a symmetry by 2 E at most."""
    findings = changed(audit={"rounding_mev": rounding_mev}, **parts)
    raised = [flag for flag in raise_flags(findings) if "printed digits" in flag.summary]
    assert [flag.severity for flag in raised] == ([] if severity is None else [severity])
    if raised:
        assert said in raised[0].summary
        assert raised[0].code == "inside-error-bar"
