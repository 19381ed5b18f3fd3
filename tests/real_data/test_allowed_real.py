"""What the indicators of the first-principles cases allow; what was counted lies in it."""

from __future__ import annotations

from typing import Any

import pytest

from real_cases import CENTROSYMMETRIC, reference, vetted

pytestmark = pytest.mark.real_data


def _holds(values: dict[str, Any], number: int) -> bool:
    if values["allowed"] is None:
        return True
    residue = number if values["modulus"] is None else number % values["modulus"]
    return residue in values["allowed"]


@pytest.mark.parametrize("case", [c for c in CENTROSYMMETRIC if "bilayer" not in c])
def test_what_was_counted_is_allowed(case: str) -> None:
    """nu0 of the first-principles parities, and every mirror Chern number."""
    verdict = vetted(case)
    allowed = verdict.witnesses.band_representations.allowed
    assert allowed is not None
    assert (allowed["status"], allowed["outside"]) == ("ok", [])
    strong = allowed["invariants"][0]
    assert strong["allowed"] == [reference(case, "dft_parity.json")["indices_wannier_occupied"][0]]
    mirrors = [i for i in allowed["invariants"] if i["invariant"] == "mirror Chern number"]
    assert {name for i in mirrors for name in i["planes"]} == set(verdict.invariants.mirror_chern)
    assert all(_holds(i, i["found"]) for i in mirrors)
    if any(allowed["combinations"]):
        assert any(allowed["fits_mirror_numbers"])
