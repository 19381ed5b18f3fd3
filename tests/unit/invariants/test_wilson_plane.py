"""What a plane and the six of them say: evidence, refusals, budgets, symmetry-related planes."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from chern_models import chiral_wilson_dirac, staggered, zeeman
from lattice_models import LatticeModel, bhz, fu_kane_mele, kane_mele, wilson_dirac
from model_changes import with_order
from topovet.invariants import wilson_witness
from topovet.invariants.results import WilsonPlane, WilsonWitness
from topovet.invariants.wilson_plane import compute_wilson_plane
from topovet.invariants.wilson_sheet import CRITERIA, SheetCriteria
from topovet.invariants.wilson_witness import compute_wilson
from topovet.model.fourier import build_bloch_sum
from topovet.model.ordering import interlacing_order
from topovet.model.plane import KPlane, coordinate_plane


def plane_of(
    model: LatticeModel, axis: int = 2, offset: float = 0.0, criteria: SheetCriteria | None = None
) -> WilsonPlane:
    bloch = build_bloch_sum(model.tight_binding())
    return compute_wilson_plane(bloch, coordinate_plane(axis, offset), model.filling, criteria)


def witness_of(
    model: LatticeModel,
    *,
    time_reversal: bool = True,
    criteria: SheetCriteria | None = None,
    equivalent: tuple[tuple[str, ...], ...] = (),
) -> WilsonWitness:
    return compute_wilson(
        build_bloch_sum(model.tight_binding()),
        model.filling,
        model.crystal.periodic,
        time_reversal=time_reversal,
        spinful=model.spinful,
        criteria=criteria,
        equivalent=equivalent,
    )


def test_a_plane_carries_its_evidence() -> None:
    plane = plane_of(kane_mele(lambda_r=0.05, lambda_v=0.1))
    assert (plane.plane, plane.status, plane.reason, plane.z2) == ("k3=0", "ok", "", 1)
    assert plane.flow_hwcc.shape == (plane.lines, 2)
    assert plane.flow_across[0] == 0.0
    assert plane.flow_across[-1] == 0.5
    assert (np.diff(plane.flow_across) > 0).all()
    assert plane.gap_centres.shape == (plane.lines,)
    assert set((plane.crossings % 2).tolist()) == {1}
    assert len(plane.references) == len(plane.crossings) >= 2
    assert plane.kramers_splitting < 1e-9
    assert plane.reversal_loss < 1e-9
    assert 0.5 < plane.smallest_singular_value <= 1.0
    assert plane.smallest_gap > 0.3


@pytest.mark.parametrize("lambda_v", [0.0, 0.1, 0.3])
def test_the_narrowest_gap_is_found(lambda_v: float) -> None:
    """|6 sqrt(3) lambda_so - 2 lambda_v| at K = (1/3, 1/3), which no first line passes through."""
    plane = plane_of(kane_mele(lambda_v=lambda_v))
    expected = abs(6 * np.sqrt(3) * 0.06 - 2 * lambda_v)
    assert plane.smallest_direct_gap_ev == pytest.approx(expected, rel=0.05)
    x, y, _ = plane.narrowest_k
    assert abs(x - y) < 0.02
    assert min(abs(x - 1 / 3), abs(x - 2 / 3)) < 0.02


@pytest.mark.parametrize("model", [kane_mele(lambda_r=0.05, lambda_v=0.1), bhz(m=1.0)])
def test_true_positions_give_the_same_index(model: LatticeModel) -> None:
    bloch = build_bloch_sum(model.tight_binding())
    for shift in (np.zeros(3), np.array([0.21, 0.4, 0.0])):
        plane = compute_wilson_plane(
            bloch,
            coordinate_plane(2, 0.0),
            model.filling,
            positions_frac=model.basis.positions_frac + shift,
        )
        assert plane.z2 == 1
        assert plane.kramers_splitting < 1e-9


def test_moving_all_orbitals_moves_all_centres() -> None:
    model = kane_mele(lambda_r=0.05, lambda_v=0.1)
    bloch, where = build_bloch_sum(model.tight_binding()), coordinate_plane(2, 0.0)
    tau = model.basis.positions_frac
    still = compute_wilson_plane(bloch, where, 2, positions_frac=tau)
    moved = compute_wilson_plane(bloch, where, 2, positions_frac=tau + np.array([0.3, 0.25, 0]))
    # loops close along k2, so the centres are positions along the second lattice vector
    expected = np.sort((still.flow_hwcc + 0.25) % 1.0, axis=1)
    np.testing.assert_allclose(moved.flow_hwcc, expected, atol=1e-6)


def test_a_budget_leaves_the_plane_unresolved() -> None:
    plane = plane_of(wilson_dirac(m=-2.9), criteria=SheetCriteria(max_solves=150))
    assert (plane.status, plane.z2) == ("unresolved", None)
    assert "budget of 150 eigenvalue problems is spent" in plane.reason
    assert plane.n_solves <= 150


@pytest.mark.parametrize(
    "model",
    [
        kane_mele(lambda_v=3 * np.sqrt(3) * 0.06),  # closes at K, on no line
        bhz(m=0.0),  # closes at Gamma
        wilson_dirac(m=-3.0),
    ],
    ids=lambda m: m.name,
)
def test_a_closed_gap_leaves_the_plane_unresolved(model: LatticeModel) -> None:
    plane = plane_of(model)
    assert (plane.status, plane.z2) == ("unresolved", None)
    assert "the direct gap goes down to" in plane.reason
    assert plane.n_solves < 1000


@pytest.mark.parametrize("gap_ev", [1e-2, 1e-3, 5e-4])
@pytest.mark.parametrize("side", [1, -1])
def test_both_sides_of_a_transition(gap_ev: float, side: int) -> None:
    """BHZ changes at m = 0, where the gap is 2|m|; the cost grows with the logarithm only."""
    plane = plane_of(bhz(m=side * gap_ev / 2))
    assert plane.z2 == (1 if side > 0 else 0)
    assert plane.n_solves < 1000


@pytest.mark.parametrize("effort", CRITERIA)
def test_every_effort_gives_the_index(effort: str) -> None:
    model = staggered(fu_kane_mele(dt=(0.4, 0, 0, 0)), 0.3)
    assert witness_of(model, criteria=CRITERIA[effort]).z2 == (1, 1, 1, 1)


class TestRefusals:
    def test_broken_time_reversal(self) -> None:
        witness = witness_of(zeeman(fu_kane_mele(dt=(0.4, 0, 0, 0)), 0.05), time_reversal=False)
        assert (witness.status, witness.z2, witness.planes) == ("not-applicable", None, ())
        assert "time reversal" in witness.reason
        assert witness.n_solves == 0

    @pytest.mark.parametrize("field", [0.3, 0.5])
    def test_broken_time_reversal_that_is_denied(self, field: float) -> None:
        """A caller who swears to it gets no index, once the field is as large as the gap."""
        witness = witness_of(zeeman(kane_mele(lambda_r=0.1), field))
        assert (witness.status, witness.z2) == ("unresolved", None)
        assert "time reversal does not hold" in witness.reason

    def test_spins_in_another_order(self) -> None:
        model = fu_kane_mele(dt=(0.4, 0, 0, 0))
        block = with_order(model, np.argsort(interlacing_order(model.n_orb)))
        assert witness_of(model).z2 == (1, 1, 1, 1)
        assert witness_of(block).z2 is None

    def test_no_spin(self) -> None:
        witness = witness_of(replace(kane_mele(), spinful=False))
        assert (witness.status, witness.z2) == ("not-applicable", None)

    @pytest.mark.parametrize("filling", [1, 3, 0, 4])
    def test_fillings_without_a_gap(self, filling: int) -> None:
        witness = witness_of(replace(kane_mele(), filling=filling))
        assert (witness.status, witness.z2) == ("failed", None)
        assert f"filling {filling}" in witness.reason


class TestSymmetryRelatedPlanes:
    MODEL = wilson_dirac(m=0.3)

    def test_they_are_solved_once(self) -> None:
        groups = (("k1=0", "k2=0", "k3=0"), ("k1=1/2", "k2=1/2", "k3=1/2"))
        some, every = witness_of(self.MODEL, equivalent=groups), witness_of(self.MODEL)
        assert some.z2 == every.z2 == (0, 1, 1, 1)
        assert [plane.plane for plane in some.planes] == ["k1=0", "k1=1/2"]
        assert ("k3=1/2", "k1=1/2") in some.assumed_equal
        assert some.n_solves < every.n_solves / 2

    def test_unknown_names_are_refused(self) -> None:
        with pytest.raises(ValueError, match="no such planes: k4=0"):
            witness_of(self.MODEL, equivalent=(("k1=0", "k4=0"),))


def test_three_determinations_that_differ_are_a_failure() -> None:
    """Only planes that do not belong to one insulator can do that: here some are declared equal."""
    model = fu_kane_mele(dt=(-0.4, 0, 0, 0))  # 0;(111): every plane is 1
    assert witness_of(model).nu0_determinations == (0, 0, 0)
    strong = chiral_wilson_dirac(m=-2.0, u=0.3)  # 1;(000)
    wrong = witness_of(strong, equivalent=(("k1=0", "k1=1/2"),))
    assert (wrong.status, wrong.z2) == ("failed", None)
    assert wrong.nu0_determinations == (0, 1, 1)
    assert "the gap closes between planes" in wrong.reason


def test_planes_are_covered_both_ways() -> None:
    """Evidence of the first way, the cost of both; one way alone on request."""
    bloch = build_bloch_sum(kane_mele(lambda_v=0.1).tight_binding())
    both, one = (
        compute_wilson(
            bloch, 2, (True, True, False), time_reversal=True, spinful=True, both_ways=both_ways
        )
        for both_ways in (True, False)
    )
    assert both.z2 == one.z2 == (1,)
    assert both.n_solves > 1.5 * one.n_solves
    np.testing.assert_array_equal(both.planes[0].flow_across, one.planes[0].flow_across)


def test_ways_that_differ_leave_the_plane_unresolved(monkeypatch: pytest.MonkeyPatch) -> None:
    """A sweep that misjudges one direction must not pass unnoticed."""
    right = plane_of(kane_mele(lambda_v=0.1))

    def misjudged(_bloch: object, plane: KPlane, *_: object, **__: object) -> WilsonPlane:
        return replace(right, z2=1 if plane.across == (1, 0, 0) else 0)

    monkeypatch.setattr(wilson_witness, "compute_wilson_plane", misjudged)
    witness = witness_of(kane_mele(lambda_v=0.1))
    assert (witness.status, witness.z2) == ("unresolved", None)
    assert "the two directions disagree (1 and 0)" in witness.reason


def test_an_unresolved_plane_is_named() -> None:
    """The mass vanishes at the three X = (1/2, 0, 0), …: all planes but those at 1/2 see them."""
    witness = witness_of(wilson_dirac(m=-1.0))
    assert (witness.status, witness.z2) == ("unresolved", None)
    assert "plane k1=0:" in witness.reason
    assert {plane.status for plane in witness.planes} == {"unresolved"}


def test_a_gap_that_one_way_finds_closed_is_closed(monkeypatch: pytest.MonkeyPatch) -> None:
    right, closed = plane_of(kane_mele(lambda_v=0.1)), plane_of(bhz(m=0.0))

    def one_way(_bloch: object, plane: KPlane, *_: object, **__: object) -> WilsonPlane:
        return right if plane.across == (1, 0, 0) else closed

    monkeypatch.setattr(wilson_witness, "compute_wilson_plane", one_way)
    witness = witness_of(kane_mele(lambda_v=0.1))
    assert (witness.status, witness.z2) == ("unresolved", None)
    assert "the direct gap goes down to" in witness.reason
