"""Real pairs: a strained chalcogenide through its transition, PbTe under pressure, BiTeI."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from topovet.deformation.comparison import EndMember, NotComparableError, compare_ends
from topovet.deformation.exchange import find_exchanges, split_by_parity
from topovet.deformation.path import build_path
from topovet.pipeline.deform import deform_cases, end_of_run
from topovet.pipeline.dossier import start_run

CASES = Path(__file__).parents[2] / "fixtures" / "cases"

pytestmark = pytest.mark.real_data


def _end(name: str) -> EndMember:
    return end_of_run(start_run(CASES / name, settings={"effort": "quick"}))


def _odd_states(name: str) -> dict[tuple[float, ...], int]:
    """Occupied odd states at each TRIM by the plane-wave states of the first-principles run."""
    told = json.loads((CASES / name / "dft_parity.json").read_text())
    return {
        tuple(t["k"]): 2 * t["parities_wannier_occupied_kramers_pairs"].count(-1)
        for t in told["trims"]
    }


@pytest.fixture(scope="module")
def selenides() -> tuple[EndMember, EndMember]:
    return _end("Sb2Se3"), _end("Sb2Se3_compressed")


def test_the_exchange_is_where_first_principles_parities_differ(
    selenides: tuple[EndMember, EndMember],
) -> None:
    pair = compare_ends(*selenides)
    assert pair.comparison.least_overlap > 0.95
    assert pair.a.inversion is not None
    before, after = _odd_states("Sb2Se3"), _odd_states("Sb2Se3_compressed")
    changed = {k for k in before if before[k] != after[k]}
    sectors = split_by_parity(build_path(pair), pair.a.inversion, 18, (True, True, True))
    found = [e for s in sectors for e in find_exchanges(s)]
    assert {e.k for e in found} == changed == {(0.0, 0.0, 0.0)}
    assert found[0].n_minus_before == before[0.0, 0.0, 0.0]
    assert found[-1].n_minus_after == after[0.0, 0.0, 0.0]


def test_another_manifold_is_refused(selenides: tuple[EndMember, EndMember]) -> None:
    with pytest.raises(NotComparableError, match="30 Wannier functions and PbTe has 12"):
        compare_ends(selenides[0], _end("PbTe"))


@pytest.mark.endurance
def test_the_selenide_passes_one_transition(tmp_path: Path) -> None:
    made = deform_cases(CASES / "Sb2Se3", CASES / "Sb2Se3_compressed", out=tmp_path)
    (closing,) = made.walk.closings
    assert closing.kind == "point"
    assert closing.k == (0, 0, 0)
    assert [(e.n_minus_before, e.n_minus_after) for e in closing.exchanges] == [(12, 10)]
    assert made.conclusion.changes is not None
    assert (made.conclusion.changes[0].before, made.conclusion.changes[0].after) == (
        (0, 0, 0, 0),
        (1, 0, 0, 0),
    )
    assert made.walk.proved_share > 0.99


@pytest.mark.endurance
def test_the_telluride_stays_open_all_the_way(tmp_path: Path) -> None:
    made = deform_cases(CASES / "PbTe_a656", CASES / "PbTe", out=tmp_path)
    assert made.walk.proved_throughout
    assert made.conclusion.changes == ()
    attained = [s.gap_ev for s in made.walk.samples]
    assert attained[0] == pytest.approx(0.091, abs=1e-3)
    assert attained[-1] == pytest.approx(0.0066, abs=1e-4)
    assert np.all(np.diff(attained) < 0)


@pytest.mark.endurance
def test_a_polar_crystal_has_a_gapless_range_between(tmp_path: Path) -> None:
    """Liu, Vanderbilt, PRB 90, 155316 (2014): BiTeI under pressure passes a Weyl phase."""
    made = deform_cases(CASES / "BiTeI", CASES / "BiTeI_pressed", out=tmp_path)
    (closing,) = made.walk.closings
    assert closing.kind == "interval"
    assert 0.3 < closing.lo < closing.hi < 0.9
    assert abs(closing.k[2]) == pytest.approx(0.5, abs=0.1)
    assert made.conclusion.changes is not None
    assert [made.conclusion.changes[0].before, made.conclusion.changes[0].after] == [
        (0, 0, 0, 0),
        (1, 0, 0, 1),
    ]
