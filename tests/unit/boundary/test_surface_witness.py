"""What the witness makes of lines: planes, weak indices, contradictions."""

from __future__ import annotations

import itertools
from dataclasses import replace

import numpy as np
import pytest

from boundary_models import surface_of
from lattice_models import wilson_dirac
from topovet.boundary.results import SurfaceLine
from topovet.boundary.witness import (
    CRITERIA,
    _judge,
    _Survey,
    compute_surface,
    prepare_surface,
    weak_indices,
)
from topovet.errors import UndefinedError


@pytest.mark.parametrize("nu", list(itertools.product((0, 1), repeat=3)))
@pytest.mark.parametrize("seed", range(4))
def test_weak_indices_that_follow_are_right(nu: tuple[int, ...], seed: int) -> None:
    """nu'_i = sum_j M_ij nu_j; an index is given exactly where two such sums fix it."""
    rows = np.random.default_rng(seed).integers(-3, 4, (2, 3))
    known = [(row, int(row @ nu) % 2) for row in rows]
    found = weak_indices(known)
    candidates = [
        trial
        for trial in itertools.product((0, 1), repeat=3)
        if all(int(row @ trial) % 2 == value for row, value in known)
    ]
    for j in range(3):
        values = {trial[j] for trial in candidates}
        assert found[j] == (values.pop() if len(values) == 1 else None)


def test_nothing_known_fixes_nothing() -> None:
    assert weak_indices([]) == (None, None, None)


def _survey() -> _Survey:
    model = wilson_dirac(m=-2.0)
    cut, place, stack = prepare_surface(
        model.tight_binding(), model.crystal, None, (0, 0, 1), most_dropped_mev=0.0
    )
    return _Survey(cut, place, stack, 2, CRITERIA["thorough"], "test", kramers=True)


def _line(parity: int | None, status: str = "ok") -> SurfaceLine:
    reason = "" if status == "ok" else "made up"
    return SurfaceLine((0.0, 0.0), (0.5, 0.0), status, reason, parity, None, 1.0, (0.0, 0.0), ())


@pytest.mark.parametrize(
    ("parities", "status", "z2"),
    [
        ((1, 0, 1, 0), "ok", (1, 0, 0, None)),
        ((1, 0, 0, 1), "ok", (1, 1, 0, None)),
        ((1, 1, 1, 1), "ok", (0, 1, 1, None)),
        ((1, 0, 0, 0), "failed", None),
        ((1, None, 1, 0), "ok", (1, 0, None, None)),
        ((1, 0), "ok", (1, None, 0, None)),
        ((1, None, None, 0), "not-applicable", None),
    ],
)
def test_routes_to_the_strong_index(parities, status, z2) -> None:
    lines = tuple(_line(p, "ok" if p is not None else "not-applicable") for p in parities)
    found = _survey()._indices(lines)
    assert (found.status, found.z2) == (status, z2)
    assert bool(found.reason) == (status != "ok")


def test_a_line_that_contradicts_itself_fails_the_surface() -> None:
    found = _survey()._indices((_line(1), _line(None, "failed"), _line(1), _line(0)))
    assert (found.status, found.z2) == ("failed", None)


def test_an_unresolved_line_is_no_missing_curve() -> None:
    found = _survey()._indices(
        (_line(None, "unresolved"), _line(0), _line(None, "not-applicable"), _line(0))
    )
    assert found.status == "unresolved"


def test_counts_that_differ_in_parity_are_a_contradiction() -> None:
    counted = surface_of(wilson_dirac(m=-2.0), (0, 0, 1), kramers=True).lines[0].crossings
    assert _judge(counted, 2) == ("ok", "")
    assert _judge((*counted[:-1], replace(counted[-1], net=0)), 2)[0] == "failed"
    lost = replace(counted[-1], net=None, status="unresolved", reason="made up")
    status, reason = _judge((*counted[:-1], lost), 2)
    assert status == "unresolved"
    assert "1 of 2" in reason


def test_both_routes_are_taken_when_thorough() -> None:
    found = surface_of(wilson_dirac(m=0.3), (0, 0, 1), kramers=True, criteria=CRITERIA["thorough"])
    assert len(found.lines) == 4
    assert found.z2 == (0, 1, 1, None)


def test_surfaces_without_kramers_pairs_are_not_counted() -> None:
    found = surface_of(wilson_dirac(m=-2.0, zeeman=0.1), (0, 0, 1), kramers=False)
    assert (found.status, found.z2) == ("not-applicable", None)


def test_undeclared_sites_leave_the_termination_unnamed() -> None:
    model = wilson_dirac(m=-2.0)
    found = compute_surface(
        model.tight_binding(),
        model.crystal,
        None,
        2,
        (0, 0, 1),
        1.0,
        CRITERIA["standard"],
        kramers=True,
        chosen_by="test",
    )
    assert found.z2_strong == 1
    assert (found.terminations, found.cut_width_ang) == (("upper half", "lower half"), None)


def test_a_filling_without_empty_bands_is_refused() -> None:
    model = replace(wilson_dirac(m=-2.0), filling=8)
    with pytest.raises(UndefinedError, match="8 of 8 are filled"):
        surface_of(model, (0, 0, 1), kramers=True)
