"""The sampled gap of real cases against a plain dense scan that shares no code with it."""

from __future__ import annotations

import numpy as np
import pytest

from real_cases import run_of
from topovet.arrays import FloatArray
from topovet.model.hamiltonian import TightBindingModel
from topovet.spectrum.results import GapSample

pytestmark = pytest.mark.real_data

DENSE = 36
"""Points of the scan along each reciprocal vector; the search starts from 18."""


def _plain_gaps(model: TightBindingModel, filling: int, k_frac: FloatArray) -> FloatArray:
    phases = np.exp(2j * np.pi * (k_frac @ model.r_cells.T))
    flat = phases @ model.h_r.reshape(model.n_r, -1)
    energies = np.linalg.eigvalsh(flat.reshape(-1, model.n_orb, model.n_orb))
    return np.asarray(energies[:, filling] - energies[:, filling - 1])


def _dense_scan(model: TightBindingModel, filling: int) -> tuple[float, FloatArray]:
    """Smallest gap of a dense mesh whose 20 lowest points are zoomed into ever more finely."""
    axis = np.arange(DENSE) / DENSE
    half = np.stack(np.meshgrid(axis[: DENSE // 2 + 1], axis, axis, indexing="ij"), -1)
    half = half.reshape(-1, 3)
    gaps = np.concatenate([_plain_gaps(model, filling, k) for k in np.array_split(half, 40)])
    spots = half[np.argsort(gaps)[:20]]
    around = np.stack(np.meshgrid(*3 * [np.linspace(-1, 1, 5)], indexing="ij"), -1).reshape(-1, 3)
    step = 1 / DENSE
    for _ in range(16):
        trial = spots[:, None] + step * around
        values = _plain_gaps(model, filling, trial.reshape(-1, 3)).reshape(len(spots), -1)
        spots = trial[np.arange(len(spots)), values.argmin(axis=1)]
        step /= 1.6
    return float(values.min()), spots[values.min(axis=1).argmin()]


@pytest.mark.parametrize("case", ["Sb", "PbTe", pytest.param("BiTeI", marks=pytest.mark.endurance)])
def test_smallest_gap_is_found(case: str) -> None:
    run = run_of(case)
    gap: GapSample = run.result("gap")
    model = run.result("hamiltonian-with-basis").lattice.model
    scanned, _ = _dense_scan(model, run.result("electrons").filling)
    assert gap.direct_ev <= scanned + 1e-7
    here = _plain_gaps(model, run.result("electrons").filling, np.array([gap.direct_k]))
    assert here[0] == pytest.approx(gap.direct_ev, abs=1e-7)


def test_cone_of_antimony() -> None:
    """Attained far below the 69 meV at L that coarser searches report (see the case's notes)."""
    gap: GapSample = run_of("Sb").result("gap")
    assert gap.direct_ev < 0.0048
    assert gap.n_solves < 8000
