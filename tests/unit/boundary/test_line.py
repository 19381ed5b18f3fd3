"""When a line is followed, when it is not, and what is then said."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from boundary_models import prepared, surface_of, tilted
from chern_models import haldane
from lattice_models import bhz, wilson_dirac
from topovet.boundary.line import Line
from topovet.boundary.witness import CRITERIA

STANDARD = CRITERIA["standard"]


def test_the_window_is_resolved_around_its_narrow_place() -> None:
    """A cone of mass 2e-3 at k_par = 0 needs points 1e-3 apart there, and only there."""
    _, _, stack = prepared(wilson_dirac(m=-2.999), (0, 0, 1))
    line = Line(stack, 2, np.zeros(2), np.array([0.5, 0.0]), STANDARD)
    points = np.array(line.resolve_window())
    width, t = line.narrowest()
    assert width == pytest.approx(2e-3, rel=1e-3)
    assert t == 0.0
    steps = np.diff(points)
    # |H(k') - H(k)| is close to a |k' - k| = 2 pi 0.5 dt for the cone, in eV
    assert np.pi * steps[0] < 0.4 * width
    assert steps[-1] > 100 * steps[0]
    assert len(points) < 80


def test_overlapping_bands_leave_no_curve() -> None:
    """A tilt along the normal shifts both edges of the projection: they overlap at every k_par."""
    model = tilted(bhz(m=1.0), {(0, 1, 0): 1.5})
    found = surface_of(model, (0, 1, 0), kramers=True)
    assert found.status == "not-applicable"
    assert "no energy curve separates the projected bulk bands" in found.reason
    assert found.z2 is None
    # seen from the other edge the same bulk has one
    assert surface_of(model, (1, 0, 0), kramers=True).z2 == (1,)


@pytest.mark.parametrize(("m", "nu"), [(-1.0, 0), (1.0, 1)])
def test_a_semimetal_with_a_direct_gap_is_followed(m: float, nu: int) -> None:
    """A tilt along the edge: no common gap, but an energy curve in between at every k_par."""
    model = tilted(bhz(m=m), {(1, 0, 0): 1.5})
    found = surface_of(model, (0, 1, 0), kramers=True)
    assert found.z2 == (nu,)
    energies = np.array([c.energies_ev for c in found.lines[0].crossings])
    # the curve must have moved by more than its window is wide
    assert np.abs(energies[:, 1] - energies[:, 0]).min() > found.lines[0].smallest_window_ev


def test_too_few_points_are_admitted() -> None:
    model = wilson_dirac(m=-2.9999)
    few = replace(STANDARD, most_points=30)
    found = surface_of(model, (0, 0, 1), kramers=True, criteria=few)
    assert found.status == "unresolved"
    assert "more than 30 points are needed" in found.reason
    assert found.z2 is None


def test_a_large_layer_is_left_to_more_effort() -> None:
    small = replace(STANDARD, most_layer=7)
    found = surface_of(wilson_dirac(m=-2.0), (0, 0, 1), kramers=True, criteria=small)
    assert (found.status, found.z2) == ("unresolved", None)
    assert "8 orbitals" in found.reason


def test_a_level_at_the_curve_where_the_line_ends_is_not_counted() -> None:
    """The Dirac point of the model lies in the middle of its window."""
    middle = replace(STANDARD, fractions=(0.5,), curves=1)
    found = surface_of(wilson_dirac(m=-2.0), (0, 0, 1), kramers=True, criteria=middle)
    assert found.status == "unresolved"
    assert any(c.status == "unresolved" for line in found.lines for c in line.crossings)
    assert all(c.net is None for line in found.lines for c in line.crossings if c.status != "ok")


def test_kramers_pairs_that_are_split_need_room() -> None:
    """Levels known to 50 meV only cannot be told from a curve 0.1 eV away."""
    model = wilson_dirac(m=-2.0)
    tight = surface_of(model, (0, 0, 1), kramers=True, symmetry_error_ev=1e-3)
    assert tight.z2_strong == 1
    loose = surface_of(model, (0, 0, 1), kramers=True, symmetry_error_ev=0.1)
    assert (loose.status, loose.z2) == ("unresolved", None)
    assert "a surface level lies at the curve" in loose.reason


def test_evidence_is_kept() -> None:
    found = surface_of(wilson_dirac(m=-2.0), (0, 0, 1), kramers=True)
    assert [(line.start, line.end, line.parity) for line in found.lines] == [
        ((0.0, 0.0), (0.5, 0.0), 1),
        ((0.0, 0.5), (0.5, 0.5), 0),
    ]
    for line in found.lines:
        assert {c.termination for c in line.crossings} == {"upper", "lower"}
        assert len({c.fraction for c in line.crossings}) == 2
        for c in line.crossings:
            assert 0 < c.largest_move <= STANDARD.most_move
            assert c.points >= STANDARD.intervals + 1
    assert found.n_solves >= sum(line.crossings[0].points for line in found.lines)


def test_threads_change_nothing(monkeypatch) -> None:
    """Batches are cut alike on one thread and on several."""
    model = haldane(m=0.1)
    found = []
    for threads in (1, 3):
        monkeypatch.setattr("topovet.spectrum.eigen.worker_count", lambda n=threads: n)
        found.append(surface_of(model, (1, 1, 0), kramers=False))
    assert found[0] == found[1]
