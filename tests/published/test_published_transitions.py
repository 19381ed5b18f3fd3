"""Walks between phases of published models: critical values, k, exchanges and indices."""

from __future__ import annotations

import numpy as np
import pytest

from deformation_ends import end_of, without_spin
from lattice_models import LatticeModel, bhz, fu_kane_mele, kane_mele, wilson_dirac
from topovet.deformation.conclusion import conclude
from topovet.deformation.results import Walk
from topovet.deformation.walk import walk
from topovet.demo.lattice import with_onsite
from topovet.demo.planar_models import haldane, qi_wu_zhang

NEAR = 1e-6


def _assert_proved(made: Walk) -> None:
    """All of lambda but the resolution on each side of the closings."""
    left_out = 2 * len(made.closings) * made.resolution
    assert made.proof_note == ""
    assert made.proved_share == pytest.approx(1 - left_out, abs=2e-3)


@pytest.mark.parametrize(
    ("masses", "lam", "n_pi", "indices"),
    [
        ((-3.6, -2.2), 3 / 7, 0, ((0, 0, 0, 0), (1, 0, 0, 0))),
        pytest.param(
            *((-1.6, 0.4), 0.3, 1, ((1, 0, 0, 0), (0, 1, 1, 1))), marks=pytest.mark.endurance
        ),
    ],
    ids=["Gamma", "X"],
)
def test_wilson_dirac_closes_at_its_critical_masses(
    masses: tuple[float, float],
    lam: float,
    n_pi: int,
    indices: tuple[tuple[int, ...], tuple[int, ...]],
) -> None:
    """m = -3 at Gamma, m = -1 at the three X: 0;(000), 1;(000), 0;(111).

    Qi, Hughes, Zhang, PRB 78, 195424 (2008); Fu, Kane, PRB 76, 045302 (2007), Eqs. 3.26-27.
    """
    made = walk(*(end_of(wilson_dirac(m=m)) for m in masses), effort="quick")
    (closing,) = made.closings
    assert closing.kind == "point"
    assert closing.lam == pytest.approx(lam, abs=NEAR)
    assert [c for c in closing.k if c] == [0.5] * n_pi
    assert {sum(c == 0.5 for c in e.k) for e in closing.exchanges} == {n_pi}
    assert len(closing.exchanges) == (3 if n_pi else 1)
    assert tuple(s.sides[0].z2 for s in made.segments) == indices
    assert all(side.agreement == "agree" for s in made.segments for side in s.sides)
    assert conclude(made).outcome == "closes"


@pytest.fixture(scope="module")
def well() -> Walk:
    return walk(end_of(bhz(m=-1.0)), end_of(bhz(m=1.5)))


def test_the_quantum_well_inverts_at_zero_mass(well: Walk) -> None:
    """Bernevig, Hughes, Zhang, Science 314, 1757 (2006): M = 0 at Gamma, nu = 0 to nu = 1."""
    (closing,) = well.closings
    assert closing.kind == "point"
    assert closing.lam == pytest.approx(0.4, abs=NEAR)
    assert closing.k == (0, 0, 0)
    assert [(e.n_minus_before, e.n_minus_after) for e in closing.exchanges] == [(0, 2)]
    assert [s.sides[0].z2 for s in well.segments] == [(0,), (1,)]
    _assert_proved(well)


def test_the_way_back_is_the_mirror_image(well: Walk) -> None:
    back = walk(end_of(bhz(m=1.5)), end_of(bhz(m=-1.0)), effort="quick")
    assert [1 - c.lam for c in back.closings] == pytest.approx(
        [c.lam for c in well.closings], abs=NEAR
    )
    assert [s.sides[0].z2 for s in back.segments[::-1]] == [s.sides[0].z2 for s in well.segments]
    for forth, home in zip(well.exchanges, back.exchanges[::-1], strict=True):
        before, after = forth.n_minus_before, forth.n_minus_after
        assert (before, after) == (home.n_minus_after, home.n_minus_before)
    gaps = {round(s.lam, 9): s.gap_ev for s in well.samples}
    both = [s for s in back.samples if round(1 - s.lam, 9) in gaps]
    assert len(both) >= 9
    for sample in both:
        assert sample.gap_ev == pytest.approx(gaps[round(1 - sample.lam, 9)], abs=NEAR)
    assert back.comparison.overlap == pytest.approx(well.comparison.overlap)


def test_chern_number_falls_to_zero_at_the_edge_of_the_phase() -> None:
    """|C| = 1 for 0 < |m| < 2, closing at m = -2 at Gamma: Qi, Wu, Zhang, PRB 74, 085308 (2006)."""
    ends = [end_of(qi_wu_zhang(m=m), time_reversal=False) for m in (-1.0, -2.6)]
    made = walk(ends[0], ends[1], effort="quick")
    (closing,) = made.closings
    assert closing.lam == pytest.approx(1 / 1.6, abs=NEAR)
    assert closing.k == (0, 0, 0)
    before, after = (s.sides[0].chern for s in made.segments)
    assert before is not None
    assert abs(before[0]) == 1
    assert after == (0,)


def test_the_chern_number_of_haldane_changes_at_k() -> None:
    """|M| = 3 sqrt(3) |t2 sin phi| at K or K': Haldane, PRL 61, 2015 (1988), Fig. 2."""
    ends = [end_of(haldane(m=m), time_reversal=False, inversion=False) for m in (0.0, 1.0)]
    made = walk(ends[0], ends[1], effort="quick")
    (closing,) = made.closings
    assert closing.lam == pytest.approx(0.3 * np.sqrt(3), abs=1e-5)
    assert np.abs(closing.k[:2]) == pytest.approx([1 / 3, 1 / 3], abs=1e-5)
    (change,) = conclude(made).changes or ()
    assert (change.index, abs(change.before[0]), change.after) == ("chern", 1, (0,))


def test_the_spin_hall_phase_ends_where_the_staggered_potential_wins() -> None:
    """lambda_v = 3 sqrt(3) lambda_so at K, without inversion: Kane, Mele, PRL 95, 226801 (2005)."""
    ends = [end_of(kane_mele(lambda_v=v), inversion=False) for v in (0.0, 0.6)]
    made = walk(ends[0], ends[1])
    (closing,) = made.closings
    assert closing.kind == "point"
    assert closing.lam == pytest.approx(3 * np.sqrt(3) * 0.06 / 0.6, abs=1e-5)
    assert np.abs(closing.k[:2]) == pytest.approx([1 / 3, 1 / 3], abs=1e-5)
    assert closing.exchanges == ()
    assert made.exchange_note == "kane_mele has no inversion"
    assert [s.sides[0].z2 for s in made.segments] == [(1,), (0,)]
    _assert_proved(made)


def test_a_way_within_one_phase_is_proved_throughout() -> None:
    made = walk(end_of(bhz(m=0.9)), end_of(bhz(m=2.0, a=0.7, d=0.2)))
    assert made.closings == ()
    assert made.proved_throughout
    result = conclude(made)
    assert (result.outcome, result.proved, result.changes) == ("stays-open", True, ())


def polar_wilson_dirac(*, m: float, field: tuple[float, float] = (1.0, 0.5)) -> LatticeModel:
    """Wilson-Dirac in a field in the z-x plane, which mixes s with pz and px on the site."""
    onsite = np.zeros((8, 8))
    for p, strength in zip((slice(2, 4), slice(4, 6)), field, strict=True):
        onsite[:2, p] = onsite[p, :2] = strength * np.eye(2)
    return with_onsite(wilson_dirac(m=m), onsite)


@pytest.mark.parametrize(
    "field",
    [pytest.param((1.0, 0.5), marks=pytest.mark.endurance), (1.0, 0.0)],
    ids=["one mirror", "four mirrors"],
)
def test_without_inversion_a_gapless_range_comes_between(field: tuple[float, float]) -> None:
    """Murakami, New J. Phys. 9, 356 (2007): a Weyl phase between the two insulators in 3D.

    With four mirrors the nodes are born on one kind of mirror plane and die on the other; on either
    a search that starts there finds no slope that leads off it.
    """
    ends = [end_of(polar_wilson_dirac(m=m, field=field), inversion=False) for m in (-3.6, -1.8)]
    made = walk(ends[0], ends[1], effort="quick")
    (closing,) = made.closings
    assert closing.kind == "interval"
    assert closing.hi - closing.lo > 4e-3
    there = polar_wilson_dirac(m=-3.6 + 1.8 * closing.lam, field=field).hamiltonian_at(closing.k)
    levels = np.linalg.eigvalsh(there)
    assert levels[2] - levels[1] < 1e-6
    assert [s.sides[0].z2 for s in made.segments] == [(0, 0, 0, 0), (1, 0, 0, 0)]
    assert conclude(made).outcome == "gapless-interval"


def test_from_a_spinless_end_to_one_with_spin_orbit_coupling() -> None:
    """One bond of four strong (t0 > 3 t): 0;(000) with and without the coupling, always open.

    Fu, Kane, Mele, PRL 98, 106803 (2007).
    """
    bare, coupled = (end_of(fu_kane_mele(lambda_so=so, dt=(2.6, 0, 0, 0))) for so in (0.0, 0.125))
    made = walk(without_spin(bare, name="bare"), coupled, effort="quick")
    assert made.comparison.spin_added == "A"
    assert made.closings == ()
    assert made.exchanges == ()
    (segment,) = made.segments
    assert [side.z2 for side in segment.sides] == [(0, 0, 0, 0)] * 2
