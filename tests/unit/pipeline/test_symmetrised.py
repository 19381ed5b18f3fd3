"""The symmetrised Hamiltonian as a case of its own, vetted beside the first."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from case_writer import write_case
from lattice_models import wilson_dirac
from topovet.errors import UndefinedError
from topovet.intake.hamiltonian.hr import read_hr
from topovet.intake.hamiltonian.hr_write import write_hr
from topovet.pipeline.dossier import start_run
from topovet.pipeline.symmetrised import vet_symmetrised

QUICK = {"effort": "quick"}


def _noisy_case(folder: Path, noise_ev: float) -> Path:
    """Wilson-Dirac with Hermitian noise that respects no symmetry."""
    case = write_case(wilson_dirac(m=-2.0), folder)
    path = next(case.glob("*_hr.dat"))
    hamiltonian = read_hr(path)
    rng = np.random.default_rng(5)
    noise = rng.normal(size=(2, *hamiltonian.h_r.shape))
    h = hamiltonian.h_r + noise_ev * (noise[0] + 1j * noise[1])
    partner = [hamiltonian.r_cells.tolist().index((-r).tolist()) for r in hamiltonian.r_cells]
    h = 0.5 * (h + h[partner].conj().transpose(0, 2, 1))
    write_hr(path, hamiltonian.r_cells, h, decimals=12)
    return case


def test_noise_is_averaged_away_and_the_index_appears(tmp_path: Path) -> None:
    case = _noisy_case(tmp_path / "case", 0.01)
    noisy = start_run(case, settings=QUICK).result("verdict")
    assert not noisy.time_reversal.present
    beside = vet_symmetrised(case, out=tmp_path / "out", settings=QUICK)
    # time reversal is broken by the noise, so it is no member of the group averaged over
    assert beside.symmetrisation.n_operations > 1
    assert max(beside.symmetrisation.after_mev) < 1e-6
    assert max(beside.symmetrisation.before_mev) > 10
    record = json.loads((tmp_path / "out" / "symmetrisation.json").read_text())
    assert record["distance_meV"] == beside.symmetrisation.distance_mev
    assert beside.dossier.verdict.inversion.violation_meV == pytest.approx(0, abs=1e-4)
    assert (tmp_path / "out" / "report.html").exists()


def test_exact_case_is_left_where_it_is(tmp_path: Path) -> None:
    case = write_case(wilson_dirac(m=-2.0), tmp_path / "case")
    first = start_run(case, settings=QUICK).result("verdict")
    beside = vet_symmetrised(case, out=tmp_path / "out", settings=QUICK)
    assert beside.symmetrisation.distance_mev < 0.01  # six decimals of the file
    assert beside.dossier.verdict.invariants == first.invariants
    assert "H(k) moved by at most" in beside.sentence


def test_without_declared_orbitals_it_says_why(tmp_path: Path) -> None:
    case = write_case(wilson_dirac(m=-2.0), tmp_path / "case", declare_projections=False)
    with pytest.raises(UndefinedError, match="cannot symmetrise"):
        vet_symmetrised(case, out=tmp_path / "out", settings=QUICK)
    assert not (tmp_path / "out").exists()
