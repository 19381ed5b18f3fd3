"""Nodes of published models: positions, charges and velocities in closed form."""

from __future__ import annotations

import numpy as np
import pytest

from lattice_models import fu_kane_mele, kane_mele, wilson_dirac
from node_models import (
    double_weyl,
    magnetic_ring,
    nodal_ring,
    on_axis_dirac,
    weyl_two_band,
)
from node_searches import LEFT_HANDED, bare_search, symmetric_search
from topovet.invariants.nodes.results import NodeSearch, PointNode


def _by_height(found: NodeSearch) -> list[PointNode]:
    return sorted(found.points, key=lambda p: p.k[2])


@pytest.mark.parametrize("kz", [0.2, 0.31])
def test_weyl_points_of_yang_lu_and_ran(kz: float) -> None:
    """PRB 84, 075129 (2011): d = (q1, q2, -s sin(2 pi kz) q3) at (0, 0, s kz)."""
    found = bare_search(weyl_two_band(kz), 1)
    assert found.complete, found.reason
    low, high = _by_height(found)
    assert low.k == pytest.approx((0, 0, -kz), abs=1e-8)
    assert high.k == pytest.approx((0, 0, kz), abs=1e-8)
    assert (low.charge, high.charge) == (1, -1)
    assert found.charge_sum == 0
    expected = sorted([4.0, 4.0, 5.0 * np.sin(2 * np.pi * kz)], reverse=True)
    assert high.velocities == pytest.approx(expected, rel=1e-6)
    assert found.elsewhere_ev >= 1e-3


def test_chirality_is_that_of_cartesian_k_in_a_left_handed_cell() -> None:
    """Reversing the third lattice vector mirrors the crystal, and turns every charge over."""
    low, high = _by_height(bare_search(weyl_two_band(0.2), 1, LEFT_HANDED))
    assert (low.charge, high.charge) == (-1, 1)


@pytest.mark.parametrize(("tilt", "kind"), [(0.2, "I"), (0.6, "II")])
def test_tilted_cones(tilt: float, kind: str) -> None:
    """Soluyanov et al., Nature 527, 495 (2015): type II where the tilt exceeds the cone's slope.

    Here the ratio is |tilt cos(2 pi kz) / sin(2 pi kz)|.
    """
    found = bare_search(weyl_two_band(0.05, tilt=tilt), 1)
    for point in found.points:
        assert point.tilt == pytest.approx(tilt / np.tan(2 * np.pi * 0.05), rel=1e-6)
        assert point.type == kind
    assert sorted(p.charge or 0 for p in found.points) == [-1, 1]


def test_double_weyl_points_on_a_fourfold_axis() -> None:
    """Fang, Gilbert, Dai, Bernevig, PRL 108, 266802 (2012): charge 2, quadratic across the axis."""
    found = bare_search(double_weyl(0.2), 1)
    assert found.complete, found.reason
    low, high = _by_height(found)
    assert (low.charge, high.charge) == (-2, 2)
    assert high.k == pytest.approx((0, 0, 0.2), abs=1e-5)
    assert high.velocities[1] < 1e-3 * high.velocities[0]
    assert high.tilt is None


@pytest.mark.parametrize("node", [0.1])
def test_dirac_points_on_a_fourfold_axis(node: float) -> None:
    """Wang et al., PRB 88, 125427 (2013): doublets j = 1/2 and 3/2 cross, C4 holds them."""
    found = symmetric_search(on_axis_dirac(node=node))
    assert found.complete, found.reason
    assert [p.kind for p in found.points] == ["dirac", "dirac"]
    for point in found.points:
        assert np.abs(point.k) == pytest.approx((0, 0, node), abs=1e-8)
        assert (point.multiplicity, point.n_filled, point.charge) == (4, 2, 0)
        assert "C4" in point.protection
        across = 4.0  # a times its lattice constant
        along = 2 * 0.5 * np.sin(2 * np.pi * node) * 5.0
        assert sorted(point.velocities) == pytest.approx(sorted([across, across, along]), rel=1e-6)


def test_dirac_points_of_the_diamond_lattice_at_x() -> None:
    """Fu, Kane, Mele, PRL 98, 106803 (2007), equal bonds; Young et al., PRL 108, 140405 (2012)."""
    found = symmetric_search(fu_kane_mele())
    assert found.complete, found.reason
    assert len(found.points) == 3
    assert {p.kind for p in found.points} == {"dirac"}
    assert len({p.orbit for p in found.points}) == 1


def test_the_transition_of_an_inversion_symmetric_insulator_is_no_dirac_semimetal() -> None:
    """Murakami, New J. Phys. 9, 356 (2007): the closing at m = -3 needs a tuned parameter."""
    found = symmetric_search(wilson_dirac(m=-3.0))
    assert [(p.kind, p.multiplicity, p.charge) for p in found.points] == [("accidental", 4, 0)]
    assert found.points[0].protection == ""


def test_weyl_points_of_a_dirac_system_in_a_field() -> None:
    """Two Weyl points on the axis of the field, Burkov, Balents, PRL 107, 127205 (2011).

    At k = (0, 0, k3) the mass is m + 2 + cos a_3 and the field h splits the levels: they meet
    where (m + 2 + cos a_3)^2 + sin^2 a_3 = h^2.
    """
    m, h = -2.8, 0.6
    found = symmetric_search(wilson_dirac(m=m, zeeman=h), time_reversal=False)
    assert found.complete, found.reason
    assert sorted(p.charge or 0 for p in found.points) == [-1, 1]
    for point in found.points:
        a = 2 * np.pi * point.k[2]
        assert (m + 2 + np.cos(a)) ** 2 + np.sin(a) ** 2 == pytest.approx(h**2, abs=1e-8)
        assert point.k[:2] == pytest.approx((0, 0), abs=1e-8)


def test_nodal_ring_in_a_mirror_plane() -> None:
    """Kim, Wieder, Kane, Rappe, PRL 115, 036806 (2015): Berry phase pi around the ring.

    The ring is cos a_1 + cos a_2 = 1 in the plane k_3 = 0.
    """
    found = symmetric_search(nodal_ring())
    assert found.complete, found.reason
    (ring,) = found.lines
    assert (ring.n_images, ring.closed, ring.winding) == (1, True, (0, 0, 0))
    assert np.cos(2 * np.pi * ring.k_frac[:, :2]).sum(axis=1) == pytest.approx(1.0, abs=1e-6)
    assert np.abs(ring.k_frac[:, 2]).max() < 1e-6
    assert abs(ring.berry_phase_pi or 0) == pytest.approx(1.0, abs=1e-6)
    fine = np.linspace(-1 / 6, 1 / 6, 20001)
    quarter = np.arccos(1 - np.cos(2 * np.pi * fine)) / (2 * np.pi)
    half = np.stack([fine, quarter], axis=1) * (2 * np.pi / 4.0)
    upper = np.linalg.norm(np.diff(half, axis=0), axis=1).sum()
    # the curve is symmetric under a_1 <-> a_2: four such pieces, |k_1| <= k_2 counted in each
    assert ring.length == pytest.approx(4 * upper, rel=2e-3)


def test_mirror_alone_holds_a_ring_with_spin_orbit_coupling() -> None:
    found = symmetric_search(magnetic_ring(), time_reversal=False)
    (ring,) = found.lines
    assert "mirror" in ring.protection


def test_broken_mirror_opens_the_ring() -> None:
    found = symmetric_search(nodal_ring(hybridise=0.05))
    assert not found.points
    assert not found.lines
    assert found.elsewhere_ev <= 0.1


def test_graphene() -> None:
    """Berry phase pi around K and K' (spinless half of PRL 95, 226801 without spin-orbit)."""
    found = symmetric_search(kane_mele(lambda_so=0.0))
    assert len(found.points) == 2
    for point in found.points:
        assert np.abs(point.k) == pytest.approx((1 / 3, 1 / 3, 0), abs=1e-7)
        assert point.multiplicity == 4
        assert point.charge is None
