"""Tipping points of the first-principles cases, checked by parities and Wilson loops beyond them.

Bi2Se3 is trivial without spin-orbit coupling and inverts at Gamma at a finite part of it: Zhang et
al., Nature Phys. 5, 438 (2009), doi:10.1038/nphys1270, Fig. 3 (from memory at about 0.6 of it; only
that it lies between 0 and 1 is tested). The L points of PbTe invert as those of SnTe, whose mirror
Chern numbers on {110} are 2 in size: Hsieh et al., Nat. Commun. 3, 982 (2012),
doi:10.1038/ncomms1969.
"""

from __future__ import annotations

import functools
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

from real_cases import run_of
from topovet.invariants.parity import compute_parity
from topovet.invariants.tipping.results import TippingPoint, TippingSearch
from topovet.invariants.tipping.search import projector_sum
from topovet.invariants.wilson_sheet import CRITERIA
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.fourier import BlochSum, added_sum
from topovet.model.orbital_groups import declared_groups
from topovet.model.spin_parts import spin_orbit_sum
from topovet.pipeline.steps_tipping import TASKS, look_for_tipping_points
from topovet.symmetry.inversion import build_inversion

pytestmark = pytest.mark.real_data

BULK = (True, True, True)


@functools.cache
def results(case: str) -> dict[str, Any]:
    """What the task takes, without the witnesses that only confirm it."""
    run = run_of(case)
    task = TASKS[0]
    left_out = ("wilson",) if case == "PbTe" else ("wilson", "mirror-chern", "group", "gap")
    return {
        name.replace("-", "_"): None if name in left_out else run.result(name)
        for name in (*task.needs, *task.wants)
    }


@functools.cache
def searched(case: str) -> TippingSearch:
    context: Any = SimpleNamespace(settings={"effort": "standard"})
    return look_for_tipping_points(context=context, **results(case))


def point(case: str, parameter: str, direction: str) -> TippingPoint:
    return next(
        p for p in searched(case).points if (p.parameter, p.direction) == (parameter, direction)
    )


def shifted(case: str, group: str, shift_ev: float) -> BlochSum:
    based = results(case)["hamiltonian_with_basis"]
    chosen = next(g for g in declared_groups(based.basis) if g.name == group)
    change = projector_sum(chosen.projector(based.lattice.model.n_orb))
    return added_sum(based.lattice.bloch, change, shift_ev)


def parities(case: str, bloch: BlochSum) -> Any:
    found = results(case)
    based, centre = found["hamiltonian_with_basis"], np.array(found["inversion"].centre)
    operator = build_inversion(based.basis, found["declarations"].crystal, centre)
    return compute_parity(bloch, operator, found["electrons"].filling, BULK, kramers=True)


def test_bi2se3_is_trivial_below_some_part_of_its_spin_orbit_coupling() -> None:
    down, up = (point("Bi2Se3", "spin-orbit scale", d) for d in ("down", "up"))
    assert down.critical is not None
    assert 0.0 < down.critical < 1.0
    assert (down.z2_before, down.z2_after) == ((1, 0, 0, 0), (0, 0, 0, 0))
    assert down.k == ((0.0, 0.0, 0.0),)
    assert up.outcome == "holds"
    assert searched("Bi2Se3").spin_hopping_ratio == pytest.approx(0.035, abs=0.01)
    bloch = results("Bi2Se3")["hamiltonian_with_basis"].lattice.bloch
    change = spin_orbit_sum(bloch)
    for scale, z2 in ((down.critical - 0.04, (0, 0, 0, 0)), (down.critical + 0.04, (1, 0, 0, 0))):
        there = added_sum(bloch, change, scale - 1)
        assert parities("Bi2Se3", there).z2 == z2
        alike = [tuple(f"k{i}={at}" for i in (1, 2, 3)) for at in ("0", "1/2")]
        wilson = compute_wilson(
            there, 18, BULK, time_reversal=True, spinful=True, criteria=CRITERIA["quick"],
            equivalent=alike, both_ways=False,
        )  # fmt: skip
        assert wilson.z2 == z2


@pytest.mark.parametrize("direction", ["up", "down"])
def test_bi2se3_flips_with_its_levels_where_parities_say_so(direction: str) -> None:
    found = point("Bi2Se3", "on-site shift", direction)
    assert found.critical is not None
    sign = np.sign(found.critical)
    before, after = (
        parities("Bi2Se3", shifted("Bi2Se3", found.group, found.critical + sign * d)).z2
        for d in (-0.01, 0.01)
    )
    assert (before, after) == (found.z2_before, found.z2_after)


def test_pbte_tips_as_soon_as_its_gap_at_l_closes() -> None:
    """Only Pb p is above the gap at L and only Te p below it, by parity: |x| is the gap."""
    found = point("PbTe", "on-site shift", "down")
    bloch = results("PbTe")["hamiltonian_with_basis"].lattice.bloch
    energies = np.linalg.eigvalsh(bloch.at(np.array([[0.5, 0.0, 0.0]]))[0])
    assert found.distance_mev == pytest.approx(1000 * (energies[6] - energies[5]), abs=0.02)
    assert len(found.k) == 4
    assert not found.may_close_before
    before, after = (
        {t.k: t.n_minus for t in parities("PbTe", shifted("PbTe", "Pb p", x)).trim}
        for x in (found.critical + 1e-3, found.critical - 1e-3)  # type: ignore[operator]
    )
    changed = {k: after[k] - before[k] for k in before if after[k] != before[k]}
    assert changed == dict.fromkeys(found.k, found.n_exchanged)


def test_pbte_becomes_a_crystalline_insulator_like_snte() -> None:
    found = point("PbTe", "on-site shift", "down")
    assert (found.group, found.outcome) == ("Pb p", "flips")
    assert found.z2_after == found.z2_before == (0, 0, 0, 0)
    assert found.mirror_before is not None
    assert found.mirror_after is not None
    assert not any(number for _, number in found.mirror_before)
    assert {abs(number) for _, number in found.mirror_after} == {0, 2}
