"""Cones followed outwards: slope, contours, spin, reach."""

from __future__ import annotations

import numpy as np
import pytest

from boundary_models import prepared, ssh_chain
from chern_models import qi_wu_zhang
from lattice_models import bhz, wilson_dirac
from topovet.boundary.cone_results import KramersPair
from topovet.boundary.contours import polar_frame
from topovet.boundary.evanescent import decay_length
from topovet.boundary.results import SurfaceLine
from topovet.boundary.surface_states import Bulk, survey_states
from topovet.symmetry.spacegroup import find_space_group

A = 3.8
"""Lattice constant of the Wilson-Dirac model, angstrom."""


def _odd_line(start, end, *, parity: int = 1, net: int | None = 1) -> SurfaceLine:
    return SurfaceLine(start, end, "ok", "", parity, net, 1.0, start, ())


@pytest.fixture(scope="module")
def wilson_dirac_states():
    """m = -2: one cone at the zone centre, E = sqrt(sin^2 k_1 + sin^2 k_2); bulk gap 2 eV."""
    model = wilson_dirac(m=-2.0)
    cut, place, stack = prepared(model, (0, 0, 1))
    names = tuple(t.name for t in place.terminations)
    lines = [_odd_line((0.0, 0.0), (0.5, 0.0))]
    bulk = Bulk(2, -1.0, 1.0, 0.3, np.array(find_space_group(model.crystal).rotations, dtype=float))
    return survey_states(stack, cut, bulk, names, lines, kramers=True)


def test_one_pair_on_each_face(wilson_dirac_states) -> None:
    found = [(p.side, p.k_par) for p in wilson_dirac_states.pairs]
    assert found == [(0, (0.0, 0.0)), (1, (0.0, 0.0))]
    assert max(abs(p.energy_ev) for p in wilson_dirac_states.pairs) < 1e-4
    assert wilson_dirac_states.buried == ()
    # both faces have the same: one is followed
    assert len(wilson_dirac_states.cones) == 1


def test_slope_and_curvature_at_the_dirac_point(wilson_dirac_states) -> None:
    (cone,) = wilson_dirac_states.cones
    assert cone.velocity_ev_ang == pytest.approx(A, rel=5e-3)
    assert np.abs(cone.curvature_ev_ang2).max() < 1e-2
    # fourfold: no hexagonal warping is made of it
    assert cone.warping.lambda_ev_ang3 is None
    assert "threefold" in cone.warping.reason


def test_contours_enclose_the_area_of_the_closed_form(wilson_dirac_states) -> None:
    """Area of sin^2 x + sin^2 y < E^2, counted on a fine mesh around the centre."""
    (cone,) = wilson_dirac_states.cones
    x = np.linspace(-0.5, 0.5, 2001)
    energy = np.hypot(*np.meshgrid(np.sin(x), np.sin(x)))
    cell = (x[1] - x[0]) ** 2 / A**2
    energies = [c.energy_ev for c in cone.contours]
    assert 0.3 in [pytest.approx(e) for e in energies]
    assert min(energies) < 0 < max(energies)
    for contour in cone.contours:
        area = float((energy < abs(contour.energy_ev)).sum()) * cell
        assert contour.area_ang2 == pytest.approx(area, rel=0.01)
        # slope and mass have the sign of the carriers
        assert np.all(np.sign(contour.velocity_ev_ang) == np.sign(contour.energy_ev))
        assert np.sign(contour.mass_m_e) == np.sign(contour.energy_ev)


def test_spin_turns_with_the_contour(wilson_dirac_states) -> None:
    """Helical: along the contour, the other way below the Dirac point, nothing along k."""
    (cone,) = wilson_dirac_states.cones
    turns = {}
    for contour in cone.contours:
        assert np.abs(contour.spin[:, [0, 2]]).max() < 0.05
        turns[contour.energy_ev] = contour.spin[:, 1]
    above = np.concatenate([t for e, t in turns.items() if e > 0])
    below = np.concatenate([t for e, t in turns.items() if e < 0])
    assert np.abs([*above, *below]).min() > 0.3
    assert len(np.unique(np.sign(above))) == len(np.unique(np.sign(below))) == 1
    assert np.sign(above[0]) == -np.sign(below[0])


def test_azimuths_turn_counter_clockwise_seen_from_outside() -> None:
    cut, _, _ = prepared(wilson_dirac(m=-2.0), (1, 1, 1))
    azimuth = np.array([0.0, np.pi / 6])
    for side, outward in ((0, -cut.normal_cart), (1, cut.normal_cart)):
        pair = KramersPair(side, (0.0, 0.0), 0.0, 0.0, -1.0, 1.0)
        frame = polar_frame(cut, pair, azimuth)
        assert frame[0, 2] == pytest.approx(outward)
        assert np.cross(frame[0, 0], frame[1, 0]) @ outward == pytest.approx(0.5)
        assert frame[0, 1] @ frame[1, 0] == pytest.approx(0.5)


def test_the_map_holds_the_contour_and_its_spin(wilson_dirac_states) -> None:
    """Dense at the Dirac point and, at the Fermi energy, where the contour is."""
    found, (cone,) = wilson_dirac_states.energy_map, wilson_dirac_states.cones
    assert found.energies_ev == (cone.pair.energy_ev, 0.3)
    assert np.all(found.density[0].argmax(axis=1) == 0)
    (contour,) = (c for c in cone.contours if c.energy_ev == 0.3)
    densest = found.k_ang[found.density[1].argmax(axis=1)]
    assert np.abs(densest - contour.k_ang.mean()).max() < 1.5 * found.k_ang[1]
    half = len(found.azimuth_rad) // 2
    assert found.density[:, :half] == pytest.approx(found.density[:, half:])
    at = int(np.abs(found.k_ang - contour.k_ang.mean()).argmin())
    spin = found.spin[1, :, at] / found.density[1, :, at, None]
    assert np.sign(spin[:, 1]) == pytest.approx(np.sign(contour.spin[0, 1]))
    assert np.abs(spin[:, [0, 2]]).max() < 0.05


@pytest.mark.parametrize("ratio", [0.3, 0.6, 0.9])
def test_reach_of_an_end_state(ratio: float) -> None:
    """(-v/w)^j: a length of a / ln(w/v), Asboth, Oroszlany, Palyi (2016), chapter 1."""
    cut, _, stack = prepared(ssh_chain(v=ratio, w=1.0), (0, 1, 0))
    found = decay_length(stack, cut, np.zeros(2), 1e-9)
    assert found == pytest.approx(4.0 / np.log(1 / ratio), rel=1e-6)


def test_reach_of_the_wilson_dirac_surface() -> None:
    """0.5^j at m = -2.5 (the Jackiw-Rebbi root of `test_slab`)."""
    cut, _, stack = prepared(wilson_dirac(m=-2.5), (0, 0, 1))
    assert decay_length(stack, cut, np.zeros(2), 0.0) == pytest.approx(A / np.log(2), rel=1e-6)


def test_helical_edges_at_the_middle_of_the_gap() -> None:
    """E = +-a sin k: one crossing of each edge at the energy asked for, with the slope there."""
    cut, place, stack = prepared(bhz(m=1.0), (0, 1, 0))
    names = tuple(t.name for t in place.terminations)
    lines = [_odd_line((0.0,), (0.5,))]
    found = survey_states(stack, cut, Bulk(2, -1.0, 1.0, None), names, lines, kramers=True)
    assert {c.side for c in found.crossings} == {0, 1}
    assert len(found.crossings) == 2
    for crossing in found.crossings:
        # not at the pair itself, which lies at the middle of the gap
        assert abs(crossing.energy_ev) > 0.1
        k = 2 * np.pi * crossing.k_edge
        assert abs(np.sin(k)) == pytest.approx(abs(crossing.energy_ev), abs=1e-3)
        length = 2 * np.pi / abs(cut.reciprocal[0, 0])
        assert abs(crossing.velocity_ev_ang) == pytest.approx(length * abs(np.cos(k)), rel=0.01)


def test_chiral_edges_and_counts_that_do_not_add_up() -> None:
    cut, place, stack = prepared(qi_wu_zhang(m=1.0), (0, 1, 0))
    names = tuple(t.name for t in place.terminations)
    bulk = Bulk(1, -1.0, 1.0, None)
    nets = {}
    for net in (1, -1):
        lines = [_odd_line((0.0,), (1.0,), net=net)]
        nets[net] = survey_states(stack, cut, bulk, names, lines, kramers=False).crossings
    told = [crossings for crossings in nets.values() if crossings]
    # one sign agrees with what is counted here, for the other nothing is said
    assert len(told) == 1
    speeds = {c.side: c.velocity_ev_ang for c in told[0]}
    assert speeds[0] == pytest.approx(-speeds[1], rel=1e-3)


def test_a_momentum_without_a_level_is_buried() -> None:
    cut, place, stack = prepared(wilson_dirac(m=-2.0), (0, 0, 1))
    names = tuple(t.name for t in place.terminations)
    # an odd line is claimed between momenta that hold no level here
    lines = [_odd_line((0.0, 0.5), (0.5, 0.5))]
    found = survey_states(stack, cut, Bulk(2, 1.0, -1.0, None), names, lines, kramers=True)
    assert found.buried == ((0.0, 0.5), (0.5, 0.5))
    # band edges that overlap, as a semimetal's: a film's gap would be no one's
    assert found.films is None
    assert "overlap" in found.film_note
