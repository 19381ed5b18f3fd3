"""Mirror Chern numbers against the list of allowed ones in the cross-examination. All invented."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from invented_findings import SOUND, changed
from space_group_samples import sample_group
from topovet.invariants.mirror_indicators import MirrorIndicator
from topovet.invariants.mirror_witness import MirrorPlane, MirrorWitness
from topovet.invariants.rotation_indicators import S4Axis, S4Indicator
from topovet.model.crystal import Crystal
from topovet.model.plane import coordinate_plane
from topovet.symmetry.group_results import FoundGroup, GroupTest, OperationTest
from topovet.symmetry.textbook_names import operation_kinds
from topovet.verdict.allowed import allowed_entry, allowed_findings, outside_the_list
from topovet.verdict.conclude import conclude, weigh_witnesses, witness_statements
from topovet.verdict.findings import Findings
from topovet.verdict.raised import raise_flags

HOME = (0.0, 0.0, 0.0)
GROUP_83 = sample_group(83)  # P4/m


def _group(broken: tuple[int, ...] = ()) -> GroupTest:
    tests = tuple(
        OperationTest(
            name="",
            rotation=w,
            translation=t,
            antiunitary=False,
            missing="",
            violation_mev=500.0 if i in broken else 0.01,
            violation_mesh_mev=None,
            violation_r_mev=0.01,
            band_shift_mev=0.01,
            band_shift_mesh_mev=None,
            holds=i not in broken,
            in_bands=True,
        )
        for i, (w, t) in enumerate(zip(GROUP_83.rotations, GROUP_83.translations, strict=True))
    )
    members = tuple(i for i in range(len(tests)) if i not in broken)
    own = FoundGroup(members, 83, "P4/m", "", ())
    return GroupTest(
        83, "P4/m", (*tests, tests[0]), len(tests), own, None, (), 0, "", 0, 0.0, 1, 0, 1.0, 1.0
    )


def _mirrors(at_0: int, at_half: int) -> MirrorWitness:
    planes = tuple(
        MirrorPlane(
            name=f"m(0 0 1) {place}",
            normal_cart=(0.0, 0.0, 1.0),
            through=HOME,
            row=(0, 0, 1),
            half=half,
            judged_mev=0.01,
            status="ok",
            reason="",
            number=number,
            taken_from="",
            evidence=None,
        )
        for place, half, number in (("k=0", False, at_0), ("k=G/2", True, at_half))
    )
    return MirrorWitness("ok", "", planes, (), 900)


AXIS = S4Axis((0.0, 0.0, 1.0), HOME, 0, ())


def _case(at_0: int, at_half: int, *, z4: int = 0, z8: int | None = 4, **parts: Any) -> Findings:
    crystal = Crystal(GROUP_83.cell, ("Te",), np.zeros((1, 3)))
    centre = None if z8 is None else HOME
    return changed(
        declared={"crystal": crystal},
        parity={"z2": (0, 0, 0, 0), "z4": z4, "centre": HOME},
        s4=S4Indicator("ok", "", 0, 0, z8, "", 1.0, 0.5, (AXIS,), centre),
        mirror=_mirrors(at_0, at_half),
        **{"group": _group(), **parts},
    )


@pytest.mark.parametrize("numbers", [(2, 2), (2, -2), (4, 0), (0, 4), (0, 0)])
def test_numbers_in_the_list(numbers: tuple[int, int]) -> None:
    """kappa = 0 and Z8 = 4 leave an even number of layers on the mirror."""
    findings = _case(*numbers)
    assert outside_the_list(findings) == ()
    assert raise_flags(findings) == ()
    assert weigh_witnesses(findings).word != "disagree"


@pytest.mark.parametrize("numbers", [(2, 0), (0, 2), (2, 4)])
def test_numbers_that_fit_alone_but_not_together(numbers: tuple[int, int]) -> None:
    """Half their sum counts the layers on the mirror, which kappa = 0 makes even."""
    findings = _case(*numbers)
    (flag,) = raise_flags(findings)
    assert (flag.code, flag.severity) == ("witnesses-disagree", "error")
    assert "together" in flag.summary
    assert weigh_witnesses(findings).word == "disagree"
    assert conclude(findings, (flag,)).class_ == "undetermined"
    assert set(outside_the_list(findings)) == {"m(0 0 1) k=0", "m(0 0 1) k=G/2"}


def test_what_another_flag_says_is_not_said_twice() -> None:
    indicator = MirrorIndicator(coordinate_plane(2, 0.0), (0.0, 0.0, 1.0), 4, "ok", "", 0, 1.0, 0.5)
    findings = _case(2, 2, mirror_indicators=(indicator,))
    (flag,) = raise_flags(findings)
    assert "rotation eigenvalues" in flag.summary
    # Z8 and kappa make both numbers of a mirror alike modulo 4, so that the other is out too
    assert outside_the_list(findings) == ("m(0 0 1) k=0", "m(0 0 1) k=G/2")
    entry = allowed_entry(findings, None)
    (plane, *_) = [i for i in entry["invariants"] if i["invariant"] == "mirror Chern number"]
    assert (plane["allowed"], plane["modulus"], plane["found"]) == ([0], 4, 2)


def test_the_list_is_no_witness_of_its_own() -> None:
    with_list, without = _case(0, 0), replace(_case(0, 0), group=None)
    assert [s.witness for s in witness_statements(with_list)] == [
        s.witness for s in witness_statements(without)
    ]


def test_operations_that_are_broken_protect_nothing() -> None:
    kinds = operation_kinds(GROUP_83.rotations)
    fourfold = tuple(i for i, kind in enumerate(kinds) if kind in ("4", "-4"))
    entry = allowed_entry(_case(2, 0, z4=2, z8=None, group=_group(fourfold)), (0, 0, 0, 0))
    assert entry["group"] == "P4/m (83)"  # the name that the group test gave to what is left
    operations = {i["operation"] for i in entry["invariants"] if "rotation" in i["invariant"]}
    assert operations == {"2 [0 0 1]"}
    assert "s4" not in entry["indicators"]
    assert entry["outside"] == []


@pytest.mark.parametrize(
    ("findings", "reason"),
    [
        (SOUND, "not tested"),
        (replace(_case(0, 0), spinful=False), "time reversal"),
        (_case(0, 0, gap={"status": "gapless"}), "no gap"),
    ],
)
def test_where_there_is_no_list(findings: Findings, reason: str) -> None:
    found = allowed_findings(findings)
    assert isinstance(found, str)
    assert reason in found
    assert allowed_entry(findings, None) == {"status": "not-applicable", "reason": found}
