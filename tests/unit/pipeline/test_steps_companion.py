"""A spinless companion through the files: used where it fits, a sentence where it does not.

The scale is turned along H0 x 1 + s (H - H0 x 1), so that a level scheme in closed form gives the
critical s also where the companion differs in more than the coupling.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from case_writer import write_case
from lattice_models import LatticeModel, kane_mele
from spinless_companions import square_sp, without_spin
from topovet.deformation.companion import CompanionTest
from topovet.errors import InputError
from topovet.invariants.tipping.results import BY_COMPANION, BY_SPIN_PART, TippingSearch
from topovet.pipeline.dossier import start_run
from topovet.pipeline.runner import Run

CASE = square_sp(offset=0.2, coupling=0.5)
COMPANION = without_spin(square_sp(offset=0.35, coupling=0.0))


def run_of(folder: Path, model: LatticeModel, companion: LatticeModel) -> Run:
    case = write_case(model, folder / "case")
    write_case(companion, folder / "without")
    with (case / "case.toml").open("a") as settings:
        settings.write('spinless = "../without"\n')
    return start_run(case)


def scaled(run: Run) -> tuple[str, float | None]:
    found: TippingSearch = run.result("tipping")
    down = next(p for p in found.points if not p.group and p.direction == "down")
    return found.scale_from, down.critical


def test_the_two_ways_differ_where_the_companion_differs_in_more(tmp_path: Path) -> None:
    """s meets p+ at offset(s) = s lambda: at offset0 / (lambda - offset + offset0) with the offset0
    of the companion, at offset/lambda with the spin-dependent part alone (below)."""
    run = run_of(tmp_path, CASE, COMPANION)
    assert scaled(run) == (BY_COMPANION, pytest.approx(0.35 / (0.5 - 0.2 + 0.35), abs=2e-6))
    test: CompanionTest = run.result("spinless-companion")
    assert (test.fits, test.reason, test.inversion_mev) == (True, "", pytest.approx(0, abs=0.01))
    # s is 150 meV higher, one level in three: 50 meV are a shift of all, 100 meV are left
    assert test.difference_mev == pytest.approx(100.0, abs=0.1)
    assert test.offset_mev == pytest.approx(50.0, abs=0.1)


def test_along_the_gap_without_inversion(tmp_path: Path) -> None:
    """nu = 1 for lambda_v < 3 sqrt(3) lambda_so (Kane, Mele, PRL 95, 146802 (2005)); here with
    lambda_v(s) = v0 + s (v - v0) and s lambda_so."""
    v, v0, edge = 0.2, 0.25, 3 * np.sqrt(3) * 0.06
    model, companion = kane_mele(lambda_v=v), without_spin(kane_mele(lambda_v=v0, lambda_so=0.0))
    found = scaled(run_of(tmp_path, model, companion))
    assert found == (BY_COMPANION, pytest.approx(v0 / (edge - v + v0), abs=1e-4))


def test_the_tasks_rest_on_the_files_of_the_companion(tmp_path: Path) -> None:
    with_one = run_of(tmp_path, CASE, COMPANION)
    names = {entry.file for entry in with_one.inputs}
    assert {"square_sp_hr.dat", "without/square_sp_spinless_hr.dat"} < names
    write_case(without_spin(square_sp(offset=0.3, coupling=0.0)), tmp_path / "without")
    changed = start_run(tmp_path / "case")
    for name, same in (("tipping", False), ("spinless-companion", False), ("wilson", True)):
        assert (with_one.key(name) == changed.key(name)) == same


def test_a_spinful_companion_is_not_used(tmp_path: Path) -> None:
    run = run_of(tmp_path, CASE, replace(CASE, name="twin"))
    test: CompanionTest = run.result("spinless-companion")
    assert test.reason.startswith("without/twin_hr.dat is spinful; name a run with spinors = .fal")
    assert scaled(run) == (BY_SPIN_PART, pytest.approx(0.4, abs=2e-6))


def test_a_damaged_companion_is_refused(tmp_path: Path) -> None:
    run = run_of(tmp_path, CASE, COMPANION)
    path = tmp_path / "without" / "square_sp_spinless_hr.dat"
    path.write_text(path.read_text()[:-40])
    with pytest.raises(InputError, match=r"without/square_sp_spinless_hr\.dat"):
        run.result("spinless-companion")
